package main

import (
	"bytes"
	"context"
	"errors"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// asProgram makes the test binary be the program: its arguments are those of
// catenrich.
const asProgram = "CATENRICH_TEST_PROGRAM"

func TestMain(m *testing.M) {
	if os.Getenv(asProgram) != "" {
		asked()
	}
	os.Exit(m.Run())
}

// program is a run of the program in a process of its own, in the working
// directory.
func program(t *testing.T, args ...string) (*exec.Cmd, *bytes.Buffer) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	t.Cleanup(cancel)
	c := exec.CommandContext(ctx, os.Args[0], args...)
	c.Env = append(os.Environ(), asProgram+"=1")
	var stderr bytes.Buffer
	c.Stderr = &stderr
	return c, &stderr
}

// exitCode is the code of a process that has ended; -1 for one that a signal
// killed.
func exitCode(err error) int {
	if ended := new(exec.ExitError); errors.As(err, &ended) {
		return ended.ExitCode()
	}
	if err != nil {
		return -2
	}
	return 0
}

// killJob is one large unit, and one small.
func killJob(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in/large.csv", catalogue(200_000, 1))
	writeFile(t, "in/small.csv", catalogue(100, 2))
	writeFile(t, "job.toml", propertyJob)
}

// TestKilled: a run that is killed leaves nothing, or the whole file, under
// the output's name, and the next run finishes and sweeps.
func TestKilled(t *testing.T) {
	killJob(t)
	start := time.Now()
	mustRun(t, "run", "job.toml", "--quiet")
	usual := time.Since(start)
	want := published(t, "out")
	killed, left := 0, 0
	for range 10 {
		os.RemoveAll("out")
		c, _ := program(t, "run", "job.toml", "--quiet")
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		time.Sleep(time.Duration(rand.Int64N(int64(usual + usual/2))))
		c.Process.Kill()
		if exitCode(c.Wait()) == -1 {
			killed++
		}
		if _, err := os.Stat("out"); err == nil {
			for path, content := range published(t, "out") {
				switch whole, ok := want[path]; {
				case ok && !bytes.Equal(content, whole):
					t.Errorf("a killed run left %d bytes of %d under the name %s", len(content), len(whole), path)
				case !ok:
					left++
				}
			}
		}
		mustRun(t, "run", "job.toml", "--quiet")
		sameTrees(t, "after a killed run and another", published(t, "out"), want)
	}
	if killed == 0 {
		t.Error("no run was killed: the delays are too long")
	}
	t.Logf("%d of 10 runs were killed, and left %d temporaries", killed, left)
}

// TestTerminated: SIGTERM ends a run within a second, exit 143, wherever it is
// waiting, and leaves nothing but the lock.
func TestTerminated(t *testing.T) {
	for _, place := range []struct{ name, input string }{
		{"silent from the start", ""},
		{"half a header", "id,z,no"},
		{"silent after the header", "id,z,note\n"},
		{"silent after many rows", catalogue(60_000, 1)},
	} {
		for _, output := range []string{"out/o.csv", "-"} {
			t.Run(place.name+" to "+output, func(t *testing.T) {
				t.Chdir(t.TempDir())
				c, stderr := program(t, "run", "-", "--redshift", "z", "--comment", "#", "--add", "all", "--max-rejects", "99999", "-o", output, "--quiet")
				c.Stdout = io.Discard
				in, err := c.StdinPipe()
				if err != nil {
					t.Fatal(err)
				}
				defer in.Close()
				if err := c.Start(); err != nil {
					t.Fatal(err)
				}
				io.WriteString(in, place.input)
				time.Sleep(300 * time.Millisecond) // for the program to start and wait
				terminate(t, c, stderr)
				if tree := published(t, "."); len(tree) > 0 {
					t.Errorf("left behind:\n%s", listing(t, "."))
				}
			})
		}
	}
	t.Run("at work", func(t *testing.T) {
		killJob(t)
		c, stderr := program(t, "run", "job.toml", "--workers", "1")
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		for deadline := time.Now().Add(20 * time.Second); ; time.Sleep(time.Millisecond) {
			if entries, _ := os.ReadDir("out"); len(entries) > 1 { // the lock directory, and the first temporary
				break
			}
			if time.Now().After(deadline) {
				t.Fatal("the run did not begin")
			}
		}
		terminate(t, c, stderr)
		for path := range published(t, "out") {
			if strings.HasPrefix(path, "large") || strings.Contains(path, "tmp") {
				t.Errorf("left behind: %s", path)
			}
		}
	})
}

func terminate(t *testing.T, c *exec.Cmd, stderr *bytes.Buffer) {
	t.Helper()
	start := time.Now()
	if err := c.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	ended := make(chan int, 1)
	go func() { ended <- exitCode(c.Wait()) }()
	select {
	case code := <-ended:
		if took := time.Since(start); code != 143 || took > time.Second {
			t.Errorf("exit %d after %v, want 143 within a second\n%s", code, took, stderr)
		}
		if !strings.Contains(stderr.String(), "stopped by signal") {
			t.Errorf("it says %q", stderr)
		}
	case <-time.After(5 * time.Second):
		c.Process.Kill()
		<-ended
		t.Errorf("it was still there after 5 s\n%s", stderr)
	}
}

// TestInterrupted: SIGINT is exit 130.
func TestInterrupted(t *testing.T) {
	t.Chdir(t.TempDir())
	c, stderr := program(t, "run", "-", "--redshift", "z", "--add", "times", "-o", "o.csv")
	in, err := c.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	defer in.Close()
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	io.WriteString(in, "z\n0.5\n")
	time.Sleep(300 * time.Millisecond)
	c.Process.Signal(syscall.SIGINT)
	if code := exitCode(c.Wait()); code != 130 {
		t.Errorf("exit %d, want 130\n%s", code, stderr)
	}
}

// TestSimultaneousRuns: several processes on one job end well, with one
// output: with --wait all of them, without it those that find a lock exit 75.
func TestSimultaneousRuns(t *testing.T) {
	killJob(t)
	mustRun(t, "run", "job.toml", "--quiet")
	want := published(t, "out")
	for _, wait := range []bool{true, false} {
		os.RemoveAll("out")
		codes := make([]int, 4)
		var wg sync.WaitGroup
		for i := range codes {
			args := []string{"run", "job.toml", "--quiet"}
			if wait {
				args = append(args, "--wait")
			}
			c, stderr := program(t, args...)
			wg.Go(func() {
				if codes[i] = exitCode(c.Run()); codes[i] != 0 && (wait || codes[i] != 75) {
					t.Errorf("exit %d\n%s", codes[i], stderr)
				}
			})
		}
		wg.Wait()
		if !wait {
			mustRun(t, "run", "job.toml", "--quiet") // whatever the race left undone
		}
		sameTrees(t, "after four runs at once", published(t, "out"), want)
	}
}

// TestIgnoredPipe: a reader that stops reading, as head does, ends the run.
func TestIgnoredPipe(t *testing.T) {
	t.Chdir(t.TempDir())
	writeFile(t, "in.csv", catalogue(200_000, 1))
	c, stderr := program(t, "run", "in.csv", "--redshift", "z", "--comment", "#", "--add", "times", "--max-rejects", "99999", "-o", "-", "--quiet")
	out, err := c.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	io.CopyN(io.Discard, out, 100)
	out.Close()
	ended := make(chan error, 1)
	go func() { ended <- c.Wait() }()
	select {
	case err := <-ended:
		if code := exitCode(err); code != 74 && code != -1 { // or SIGPIPE
			t.Errorf("exit %d\n%s", code, stderr)
		}
	case <-time.After(20 * time.Second):
		c.Process.Kill()
		t.Error("it does not end")
	}
}
