//go:build linux

package main

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"catenrich/internal/publish"
)

// long is how often a test tries what it tries at random: often if asked for by
// CATENRICH_LONG, seldom in the short mode.
func long(t *testing.T, often, usual, short int) int {
	t.Helper()
	switch {
	case os.Getenv("CATENRICH_LONG") != "":
		return often
	case testing.Short():
		return short
	}
	return usual
}

// jobs are two jobs of one output directory, so that each replaces the work of
// the other.
func twoJobs(t *testing.T) (jobs [2]string, works [2]map[string][]byte) {
	t.Helper()
	z := make([]float64, 150_000)
	for i := range z {
		z[i] = float64(1+i%4999) / 1000
	}
	parquet := parquetOf(t, 60_000, z)
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", catalogue(60_000, 1))
	writeFile(t, "in/b.parquet", parquet)
	writeFile(t, "in/c.fits", smallFITS(z[:50_000]...))
	all := strings.Replace(propertyJob, "in/*.csv", "in/*", 1)
	writeFile(t, "one.toml", all)
	writeFile(t, "two.toml", strings.Replace(all, `"lookback_time"`, `"age_at_emission", "comoving_volume"`, 1))
	jobs = [2]string{"one.toml", "two.toml"}
	for i, job := range jobs {
		mustRun(t, "run", job, "--quiet")
		works[i] = published(t, "out")
	}
	return jobs, works
}

// checkThreeStates looks at each unit in the tree: old output under the old
// manifest, new output under the pending or the new manifest.
func checkThreeStates(t *testing.T, got, old, new map[string][]byte) (state string) {
	t.Helper()
	for _, output := range []string{"a.csv", "b.parquet", "c.fits"} {
		manifest, pending := publish.ManifestPath(output), publish.PendingPath(output)
		same := func(path string, in map[string][]byte, as string) bool { return bytes.Equal(got[path], in[as]) }
		switch {
		case same(output, old, output) && same(manifest, old, manifest):
			state += "o"
		case same(output, new, output) && same(manifest, new, manifest):
			state += "n"
		case same(output, new, output) && same(pending, new, manifest):
			state += "p"
		default:
			t.Fatalf("%s has %d bytes, where the old one has %d and the new one %d; there is\n%s", output, len(got[output]), len(old[output]), len(new[output]), listing(t, "out"))
		}
	}
	return state
}

// TestKilledWhileReplacing kills runs that replace the outputs of another job,
// at random moments.
func TestKilledWhileReplacing(t *testing.T) {
	jobs, works := twoJobs(t)
	start := time.Now()
	c, stderr := program(t, "run", jobs[0], "--quiet", "--workers", "2")
	if code := exitCode(c.Run()); code != 0 {
		t.Fatalf("exit %d\n%s", code, stderr)
	}
	usual := time.Since(start)
	states := map[string]int{}
	for i := range long(t, 50, 8, 2) {
		from, to := i%2, (i+1)%2
		c, _ := program(t, "run", jobs[to], "--quiet", "--workers", "2")
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		time.Sleep(rand.N(usual + usual/2))
		c.Process.Kill()
		c.Wait()
		states[checkThreeStates(t, published(t, "out"), works[from], works[to])]++
		mustRun(t, "run", jobs[to], "--quiet")
		sameTrees(t, "after a killed run and another", published(t, "out"), works[to])
	}
	t.Logf("units old (o), new (n) and pending (p) after each kill: %v", states)
}

// mountTmpfs mounts a filesystem in memory below the working directory.
func mountTmpfs(t *testing.T, dir, size string) {
	t.Helper()
	if err := os.Mkdir(dir, 0o777); err != nil {
		t.Fatal(err)
	}
	if err := unix.Mount("catenrich-test", dir, "tmpfs", 0, "size="+size); err != nil {
		t.Skipf("a filesystem that fills needs the right to mount one: %v", err)
	}
	at, err := filepath.Abs(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := unix.Unmount(at, 0); err != nil {
			t.Errorf("unmounting %s: %v", at, err)
		}
	})
}

// TestFullFilesystem runs a job on 64 MiB of which more and more is free: it
// succeeds, or says that the disk is full, with the old work untouched and no
// temporary left; and with room the next run succeeds.
func TestFullFilesystem(t *testing.T) {
	jobs, works := twoJobs(t)
	mountTmpfs(t, "full", "64m")
	for _, job := range jobs {
		writeFile(t, job, strings.Replace(string(readFile(t, job)), `"out"`, `"full/out"`, 1))
	}
	mustRun(t, "run", jobs[0], "--quiet")
	works[0] = published(t, "full/out") // the report names its directory
	mustRun(t, "run", jobs[1], "--quiet")
	works[1] = published(t, "full/out")

	need := int64(0)
	for _, content := range works[0] {
		need += int64(len(content))
	}
	var fs unix.Statfs_t
	failed, done := 0, 0
	for i := range long(t, 50, 10, 3) {
		mustRun(t, "run", jobs[1], "--quiet")
		if err := unix.Statfs("full", &fs); err != nil {
			t.Fatal(err)
		}
		free := rand.N(need)
		if i == 0 {
			free = 0
		}
		ballast(t, "full/ballast", int64(fs.Bfree)*fs.Bsize-free)
		r := runHere(t, []string{"run", jobs[0], "--quiet"}, nil)
		got := published(t, "full/out")
		switch {
		case r.code == 0:
			done++
			sameTrees(t, "a run that found room", got, works[0])
		case r.code != 74 || !strings.Contains(r.stderr, "no space left on device") || !strings.Contains(r.stderr, "full/out"):
			t.Fatalf("%d bytes free: exit %d\n%s", free, r.code, r.stderr)
		default:
			failed++
			checkThreeStates(t, got, works[1], works[0])
			for path := range got {
				if strings.HasSuffix(path, ".tmp") {
					t.Errorf("%d bytes free: left %s", free, path)
				}
			}
		}
		if err := os.Remove("full/ballast"); err != nil {
			t.Fatal(err)
		}
		mustRun(t, "run", jobs[0], "--quiet")
		sameTrees(t, "the run after, with room", published(t, "full/out"), works[0])
	}
	t.Logf("%d runs found too little room, %d enough", failed, done)
}

// ballast makes a file that takes up room.
func ballast(t *testing.T, path string, size int64) {
	t.Helper()
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if size > 0 {
		if err := unix.Fallocate(int(f.Fd()), 0, 0, size); err != nil {
			t.Fatal(err)
		}
	}
}

// TestReadOnly: exit 73, and what stands there stands.
func TestReadOnly(t *testing.T) {
	check := func(t *testing.T) {
		t.Helper()
		for _, out := range []string{"ro/new/a.csv", "ro/a.csv", "ro/old.csv"} {
			before := published(t, "ro")
			r := runHere(t, []string{"run", "in.csv", "--redshift", "z", "--add", "times", "-o", out}, nil)
			if r.code != 73 || !strings.Contains(r.stderr, "ro") {
				t.Errorf("%s: exit %d, want 73 and the place\n%s", out, r.code, r.stderr)
			}
			sameTrees(t, out, published(t, "ro"), before)
		}
	}
	prepare := func(t *testing.T) {
		t.Helper()
		writeFile(t, "in.csv", "z\n0.5\n")
		mustRun(t, "run", "in.csv", "--redshift", "z", "--add", "distances", "-o", "ro/old.csv", "--quiet")
	}
	t.Run("filesystem", func(t *testing.T) {
		t.Chdir(t.TempDir())
		mountTmpfs(t, "ro", "1m")
		prepare(t)
		if err := unix.Mount("", "ro", "", unix.MS_REMOUNT|unix.MS_RDONLY, ""); err != nil {
			t.Skip(err)
		}
		check(t)
	})
	t.Run("directory", func(t *testing.T) {
		if os.Geteuid() == 0 {
			t.Skip("permissions do not bind the superuser")
		}
		t.Chdir(t.TempDir())
		prepare(t)
		for _, dir := range []string{"ro/.catenrich", "ro"} {
			if err := os.Chmod(dir, 0o500); err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { os.Chmod(dir, 0o700) })
		}
		check(t)
	})
}

// withHole puts zeros that take no room on the disk between the pages of a
// Parquet file and its footer.
func withHole(t *testing.T, path, parquet string, size int64) {
	t.Helper()
	at := len(parquet) - 8 - int(binary.LittleEndian.Uint32([]byte(parquet[len(parquet)-8:])))
	writeFile(t, path, parquet[:at])
	f, err := os.OpenFile(path, os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if _, err := f.WriteAt([]byte(parquet[at:]), size-int64(len(parquet)-at)); err != nil {
		t.Fatal(err)
	}
}

// endless is a pipe with a catalogue that does not end.
type endless struct{ sent int }

func (e *endless) Read(p []byte) (int, error) {
	const rows = "id,z,note\n1,0.5,x\n2,0.25,y\n3,1.5,z\n"
	n := 0
	for n < len(p) {
		if e.sent == len(rows) {
			e.sent = len("id,z,note\n")
		}
		m := copy(p[n:], rows[e.sent:])
		n, e.sent = n+m, e.sent+m
	}
	return n, nil
}

// TestStopped sends both signals at random moments to runs that have much
// before them: they end within a second, and leave nothing.
func TestStopped(t *testing.T) {
	parquet := string(readFile(t, "../../testdata/small/parquet-go-bloom.parquet"))
	z := make([]float64, 3_000_000)
	for i := range z {
		z[i] = float64(1+i%99991) / 20_000
	}
	t.Chdir(t.TempDir())
	writeFile(t, "a.csv", strings.Repeat(catalogue(100_000, 1), 6))
	writeFile(t, "b.csv.gz", packed(t, catalogue(400_000, 1)))
	writeFile(t, "c.fits", smallFITS(z...))
	withHole(t, "d.parquet", parquet, 20<<30)
	for _, input := range []string{"-", "a.csv", "b.csv.gz", "c.fits", "d.parquet"} {
		for _, signal := range []syscall.Signal{syscall.SIGTERM, syscall.SIGINT} {
			t.Run(fmt.Sprintf("%s %v", input, signal), func(t *testing.T) {
				for range long(t, 10, 1, 1) {
					stopOnce(t, input, signal)
				}
			})
		}
	}
}

func stopOnce(t *testing.T, input string, signal syscall.Signal) {
	t.Helper()
	out := "out/o" + filepath.Ext(strings.TrimSuffix(input, ".gz"))
	if input == "-" {
		out = "out/o.csv"
	}
	c, stderr := program(t, "run", input, "--redshift", "z", "--comment", "#", "--add", "all", "--max-rejects", "9999999", "-o", out, "--quiet", "--workers", "2")
	if input == "-" {
		c.Stdin = &endless{}
		c.WaitDelay = time.Second // for the goroutine that feeds it
	}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	for deadline := time.Now().Add(20 * time.Second); ; time.Sleep(time.Millisecond) {
		if temporaries, _ := filepath.Glob("out/.catenrich_*"); len(temporaries) > 0 {
			break
		}
		if time.Now().After(deadline) {
			t.Fatal("the run did not begin")
		}
	}
	time.Sleep(rand.N(500 * time.Millisecond))
	start := time.Now()
	if err := c.Process.Signal(signal); err != nil {
		t.Skip("it was done before: ", err)
	}
	state, err := c.Process.Wait()
	took := time.Since(start)
	if err != nil {
		t.Fatal(err)
	}
	if state.ExitCode() == 0 {
		t.Log("it was done before")
		os.RemoveAll("out")
		return
	}
	// A second is what is promised; a machine that is busy with other tests and
	// their disk gets some more.
	if code := state.ExitCode(); code != 128+int(signal) || took > 3*time.Second {
		t.Errorf("exit %d after %v\n%s", code, took, stderr)
	}
	t.Logf("ended after %v", took)
	if left := published(t, "out"); len(left) > 0 {
		t.Errorf("left behind:\n%s", listing(t, "out"))
	}
}

// TestEightAtOnce: eight processes of one job, which replaces the work of
// another, leave one right output. With --wait all succeed; without it those
// that find a lock exit 75, and whoever holds it succeeds.
func TestEightAtOnce(t *testing.T) {
	jobs, works := twoJobs(t)
	one := strings.NewReplacer("in/*", "in/b.parquet", `"out"`, `"alone"`)
	for i, job := range jobs {
		writeFile(t, fmt.Sprintf("alone%d.toml", i), one.Replace(string(readFile(t, job))))
	}
	for i := range long(t, 10, 2, 1) {
		mustRun(t, "run", jobs[(i+1)%2], "--quiet")
		if codes := eight(t, "run", jobs[i%2], "--quiet", "--wait"); codes[0] != 8 {
			t.Errorf("with --wait: exit codes %v", codes)
		}
		sameTrees(t, "after eight runs that wait", published(t, "out"), works[i%2])

		codes := eight(t, "run", fmt.Sprintf("alone%d.toml", i%2), "--quiet")
		if codes[0] == 0 || codes[0]+codes[75] != 8 {
			t.Errorf("without --wait: exit codes %v", codes)
		}
		for _, path := range []string{"b.parquet", "b.parquet.manifest.json"} {
			if got := published(t, "alone")[path]; !bytes.Equal(got, works[i%2][path]) {
				t.Errorf("without --wait, exit codes %v: %s has %d bytes, want %d others", codes, path, len(got), len(works[i%2][path]))
			}
		}
		t.Logf("without --wait: exit codes %v", codes)
	}
}

// eight starts as many processes of the program at once, and counts their exit
// codes.
func eight(t *testing.T, args ...string) map[int]int {
	t.Helper()
	var all [8]*exec.Cmd
	var said [8]*bytes.Buffer
	for i := range all {
		all[i], said[i] = program(t, args...)
		if err := all[i].Start(); err != nil {
			t.Fatal(err)
		}
	}
	codes := map[int]int{}
	for i, c := range all {
		code := exitCode(c.Wait())
		if codes[code]++; code != 0 && code != 75 {
			t.Errorf("exit %d\n%s", code, said[i])
		}
	}
	return codes
}

// TestNoRegularFile: a pipe that nobody writes to, and a device without end,
// are refused before they are opened.
func TestNoRegularFile(t *testing.T) {
	t.Chdir(t.TempDir())
	if err := unix.Mkfifo("pipe.csv", 0o600); err != nil {
		t.Skip(err)
	}
	if err := os.Symlink("/dev/zero", "zero.csv"); err != nil {
		t.Fatal(err)
	}
	for _, input := range []string{"pipe.csv", "zero.csv"} {
		r := runHere(t, []string{"run", input, "--redshift", "z", "--add", "times", "-o", "out.csv"}, nil)
		if r.code != 66 || !strings.Contains(r.stderr, input+" is no regular file") {
			t.Errorf("%s: exit %d, want 66\n%s", input, r.code, r.stderr)
		}
	}
	if err := os.Symlink("/dev/zero", "zero.toml"); err != nil {
		t.Fatal(err)
	}
	if r := runHere(t, []string{"run", "zero.toml"}, nil); r.code != 66 || !strings.Contains(r.stderr, "zero.toml") {
		t.Errorf("a job file without end: exit %d, want 66\n%s", r.code, r.stderr)
	}
}
