//go:build linux

package main

import (
	"fmt"
	"os"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"

	"catenrich/internal/fault"
)

// confined runs the program as setting asks, in the working directory.
func confined(t *testing.T, setting, value string, args ...string) (code int, stderr string) {
	t.Helper()
	c, out := program(t, args...)
	c.Env = append(c.Env, setting+"="+value)
	err := c.Run()
	code = exitCode(err)
	if code == 99 {
		t.Skipf("this system does not let a process be confined: %s", out)
	}
	return code, out.String()
}

// TestNoConnections: no command makes a socket, let alone a connection. The
// process that does is killed by the kernel.
func TestNoConnections(t *testing.T) {
	fixture := readFile(t, "../../testdata/small/parquet-go-bloom.parquet")
	t.Chdir(t.TempDir())
	writeFile(t, "in/a.csv", catalogue(100, 1))
	writeFile(t, "in/a.fits", smallFITS(0.5, 1))
	writeFile(t, "in/a.parquet", string(fixture))
	writeFile(t, "job.toml", strings.Replace(propertyJob, "in/*.csv", "in/*", 1))
	for _, args := range [][]string{
		{"plan", "job.toml"}, {"run", "job.toml"}, {"run", "job.toml"}, {"gather", "job.toml"}, {"report", "out"}, {"verify", "out/a.csv", "out/a.parquet", "out/a.fits"},
		{"explain", "out/a.csv", "--row", "1"}, {"columns"}, {"demo", "demo"}, {"version"}, {"run", "absent.csv"},
	} {
		want := 0
		if slices.Contains(args, "absent.csv") {
			want = 64 // no output place
		}
		if code, stderr := confined(t, withoutSockets, "1", args...); code != want {
			t.Errorf("catenrich %s: exit %d, want %d\n%s", strings.Join(args, " "), code, want, stderr)
		}
	}
	if code, _ := confined(t, withoutSockets, dials, "version"); code != -1 {
		t.Errorf("a process that dials ends with exit %d: this test would see nothing", code)
	}
}

// TestFilesystemWithoutLocks: it is said once, for any number of units, and
// the work is done; several runs at once leave one right output.
func TestFilesystemWithoutLocks(t *testing.T) {
	t.Chdir(t.TempDir())
	for i := range 12 {
		writeFile(t, fmt.Sprintf("in/%d.csv", i), catalogue(200, uint64(i)))
	}
	writeFile(t, "job.toml", propertyJob)
	mustRun(t, "run", "job.toml", "--quiet")
	want := published(t, "out")
	os.RemoveAll("out")
	code, stderr := confined(t, withoutLocks, "1", "run", "job.toml", "--quiet", "--workers", "4")
	if n := strings.Count(stderr, "this filesystem has no locks"); code != 0 || n != 1 {
		t.Errorf("exit %d, and the warning stands %d times, want once\n%s", code, n, stderr)
	}
	sameTrees(t, "a run without locks", published(t, "out"), want)

	os.RemoveAll("out")
	codes := make([]int, 4)
	var wg sync.WaitGroup
	for i := range codes {
		wg.Go(func() {
			var stderr string
			codes[i], stderr = confined(t, withoutLocks, "1", "run", "job.toml", "--quiet")
			switch codes[i] { // one may see another's half step, and say so
			case 0, int(fault.CantCreate), int(fault.IO), int(fault.TryAgain):
			default:
				t.Errorf("exit %d\n%s", codes[i], stderr)
			}
		})
	}
	wg.Wait()
	mustRun(t, "run", "job.toml", "--quiet")
	sameTrees(t, fmt.Sprintf("after runs at once without locks, which ended with exit %v", codes), published(t, "out"), want)
}

// TestFewFiles: many units need no more open files than those that are worked
// on, whatever their number.
func TestFewFiles(t *testing.T) {
	fixture := string(readFile(t, "../../testdata/small/parquet-go-bloom.parquet"))
	t.Chdir(t.TempDir())
	for i := range 300 {
		writeFile(t, fmt.Sprintf("in/%d.csv", i), catalogue(10, uint64(i)))
	}
	for i := range 100 {
		writeFile(t, fmt.Sprintf("in/%d.parquet", i), fixture)
	}
	writeFile(t, "job.toml", strings.Replace(propertyJob, "in/*.csv", "in/*", 1))
	// Standard streams and the runtime's own, and for each of two units in
	// flight: input, its copy for the digest, output, rejects, columns, lock,
	// a directory, a manifest.
	const limit = 10 + 2*8
	if code, stderr := confined(t, fewFiles, strconv.Itoa(limit), "run", "job.toml", "--workers", "2", "--quiet"); code != 0 {
		t.Errorf("with %d files: exit %d\n%s", limit, code, stderr)
	}
	os.RemoveAll("out")
	code, stderr := confined(t, fewFiles, "9", "run", "job.toml", "--workers", "2", "--quiet")
	if code == 0 || code == 70 || !strings.Contains(stderr, "too many open files") {
		t.Errorf("with too few files: exit %d\n%.500s", code, stderr)
	}
	for path := range published(t, "out") {
		if strings.Contains(path, ".tmp") {
			t.Errorf("left behind: %s", path)
		}
	}
}

// TestMemory: --memory is kept to, whatever the number of workers, rows and
// units. What it does not count is the program itself, and per unit in flight
// one record, read, kept and written, where a record is longer than a chunk.
func TestMemory(t *testing.T) {
	if raceDetector {
		t.Skip("the race detector takes memory of its own")
	}
	z := make([]float64, 1_000_000)
	for i := range z {
		z[i] = float64(1+i%99991) / 20_000
	}
	rows := catalogue(600_000, 1)
	long := "id,z,note\n" + strings.Repeat("1,0.5,"+strings.Repeat("0123456789abcdef", 1<<20)+"\n", 24)
	const mebi = 1 << 20
	for _, c := range []struct {
		name, file, text string
		copies           int
		add              string
		memory, most     int // MiB
	}{
		{"CSV", "a.csv", rows, 1, "all", 64, 64 + 48},
		{"Parquet in one row group", "a.parquet", parquetOf(t, len(z), z), 1, "all", 64, 64 + 128},
		{"Parquet in many row groups", "a.parquet", parquetOf(t, 10_000, z), 1, "all", 64, 64 + 128},
		{"FITS", "a.fits", smallFITS(z...), 1, "all", 64, 64 + 48},
		{"many units", "a.parquet", parquetOf(t, 70_000, z[:70_000]), 24, "all", 64, 64 + 128},
		{"CSV with long records", "a.csv", long, 1, "lookback_time", 200, 200 + 5*16*2},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Chdir(t.TempDir())
			for i := range c.copies {
				writeFile(t, fmt.Sprintf("in/%d-%s", i, c.file), c.text)
			}
			writeFile(t, "job.toml", strings.NewReplacer("in/*.csv", "in/*", `"luminosity_distance", "lookback_time", "superluminal_now"`, strconv.Quote(c.add)).Replace(propertyJob))
			code, stderr := confined(t, tellPeak, "peak", "run", "job.toml", "--quiet", "--workers", "16", "--memory", fmt.Sprintf("%dM", c.memory))
			if code != 0 {
				t.Fatalf("exit %d\n%s", code, stderr)
			}
			kib, err := strconv.Atoi(string(readFile(t, "peak")))
			if err != nil || kib == 0 {
				t.Fatalf("the peak is %d KiB, %v", kib, err)
			}
			t.Logf("%d MiB of input, --memory %dM, --workers 16: peak %d MiB, at most %d allowed", c.copies*len(c.text)/mebi, c.memory, kib>>10, c.most)
			if kib>>10 > c.most {
				t.Errorf("peak memory is %d MiB, want at most %d", kib>>10, c.most)
			}
		})
	}
}
