package publish

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"catenrich/internal/fault"
)

// TestMain lets the test binary be its own child process: with childTarget set
// it publishes there and does nothing else.
func TestMain(m *testing.M) {
	if target := os.Getenv(childTarget); target != "" {
		os.Exit(child(target, os.Stdout))
	}
	os.Exit(m.Run())
}

const childTarget = "PUBLISH_TEST_TARGET"

// childText is what the child publishes: enough for many blocks.
var childText = bytes.Repeat([]byte("Quill Ridge is an invented survey\n"), 100_000)

// child publishes childText, with rejects, and says when it has written half.
func child(target string, progress io.Writer) int {
	err := func() (err error) {
		r, err := Begin(OS, target, Options{})
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, r.Abort()) }()
		rejects, err := r.Create(".rejects.csv")
		if err != nil {
			return err
		}
		o, err := r.Create("")
		if err != nil {
			return err
		}
		half := len(childText) / 2
		if err := errors.Join(second(rejects.Write([]byte("r\n"))), second(o.Write(childText[:half]))); err != nil {
			return err
		}
		fmt.Fprintln(progress, "half")
		if err := second(o.Write(childText[half:])); err != nil {
			return err
		}
		return r.Commit(manifestOf("child"))
	}()
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		return int(fault.Of(err))
	}
	return 0
}

func startChild(t *testing.T, target string) (cmd *exec.Cmd, stdout *bufio.Reader, stderr *bytes.Buffer) {
	t.Helper()
	cmd = exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), childTarget+"="+target)
	stderr = new(bytes.Buffer)
	cmd.Stderr = stderr
	pipe, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	return cmd, bufio.NewReader(pipe), stderr
}

// TestKill kills a publishing process at moments spread over its life. Under
// the output's name stands nothing, or the whole output described by a
// manifest; the next run finishes, and a sweep leaves nothing else.
func TestKill(t *testing.T) {
	const kills = 30
	whole := 0
	for i := range kills {
		dir := t.TempDir()
		target := filepath.Join(dir, "out.csv")
		cmd, stdout, _ := startChild(t, target)
		if _, err := stdout.ReadString('\n'); err != nil {
			t.Fatal(err)
		}
		time.Sleep(time.Duration(i) * 400 * time.Microsecond)
		cmd.Process.Kill()
		cmd.Wait()

		got, err := os.ReadFile(target)
		switch {
		case err == nil && bytes.Equal(got, childText):
			whole++
			if s, err := Look(OS, target); err != nil || !s.Ours {
				t.Fatalf("kill %d: the output is whole and not ours: %+v, %v", i, s, err)
			}
		case !errors.Is(err, os.ErrNotExist):
			t.Fatalf("kill %d: %d bytes under the output's name (%v), want none or %d", i, len(got), err, len(childText))
		}
		cmd, stdout, stderr := startChild(t, target)
		stdout.ReadString('\n')
		if err := cmd.Wait(); err != nil {
			t.Fatalf("kill %d: the next run: %v: %s", i, err, stderr)
		}
		if err := Sweep(OS, dir); err != nil {
			t.Fatal(err)
		}
		wantFiles(t, dir, map[string]string{"out.csv": string(childText), "out.csv.rejects.csv": "r\n", "out.csv.manifest.json": "*"})
	}
	t.Logf("of %d kills %d came after the output was in place", kills, whole)
}

// TestSimultaneousProcesses publishes one output from several processes without
// a lock, which is the worst a filesystem without locks can do: all write the
// same bytes, so whoever is last, the files are right.
func TestSimultaneousProcesses(t *testing.T) {
	for range 3 {
		dir := t.TempDir()
		target := filepath.Join(dir, "out.csv")
		var wait sync.WaitGroup
		codes := make([]int, 8)
		for i := range codes {
			cmd, stdout, stderr := startChild(t, target)
			wait.Go(func() {
				stdout.ReadString('\n')
				cmd.Wait()
				if codes[i] = cmd.ProcessState.ExitCode(); codes[i] != 0 {
					t.Logf("process %d: exit %d: %s", i, codes[i], stderr)
				}
			})
		}
		wait.Wait()
		// A run may see another's half step and give up; it must say so.
		done := 0
		for _, c := range codes {
			switch fault.Class(c) {
			case 0:
				done++
			case fault.CantCreate, fault.IO, fault.TryAgain:
			default:
				t.Errorf("a process ended with exit %d", c)
			}
		}
		if done == 0 {
			t.Errorf("none of %d processes published: %v", len(codes), codes)
		}
		if got, err := os.ReadFile(target); err != nil || !bytes.Equal(got, childText) {
			t.Fatalf("the output is wrong: %d bytes, %v", len(got), err)
		}
		if s, err := Look(OS, target); err != nil || !s.Ours {
			t.Fatalf("the output is not ours: %+v, %v", s, err)
		}
		if err := child(target, io.Discard); err != 0 { // and a last run leaves it whole
			t.Fatalf("the last run: exit %d", err)
		}
		if err := Sweep(OS, dir); err != nil {
			t.Fatal(err)
		}
		wantFiles(t, dir, map[string]string{"out.csv": string(childText), "out.csv.rejects.csv": "r\n", "out.csv.manifest.json": "*"})
	}
}

func TestSimultaneousGoroutines(t *testing.T) {
	dir := t.TempDir()
	var wait sync.WaitGroup
	for i := range 8 {
		wait.Go(func() { // different outputs in one directory
			target := filepath.Join(dir, fmt.Sprintf("out%d.csv", i))
			if err := publishFiles(OS, target, map[string]string{"": "x\n", ".rejects.csv": "r"}, Options{}); err != nil {
				t.Error(err)
			}
		})
	}
	wait.Wait()
	want := map[string]string{}
	for i := range 8 {
		name := fmt.Sprintf("out%d.csv", i)
		want[name], want[name+".rejects.csv"], want[name+".manifest.json"] = "x\n", "r", "*"
	}
	wantFiles(t, dir, want)
}

func TestSweep(t *testing.T) {
	dir := t.TempDir()
	cmd, stdout, _ := startChild(t, filepath.Join(dir, "dead", "out.csv"))
	stdout.ReadString('\n')
	gone := cmd.Process.Pid
	cmd.Process.Kill()
	cmd.Wait()

	me := self()
	now := time.Now()
	cases := []struct {
		name          string
		host, boot    string
		pid           int
		start         uint64
		age           time.Duration
		wantAbandoned bool
	}{
		{"mine", me.host, me.boot, me.pid, me.start, 30 * 24 * time.Hour, false},
		{"mine of an earlier life of the pid", me.host, me.boot, me.pid, me.start - 1, 0, true},
		{"of a process that is gone", me.host, me.boot, gone, 1, 0, true},
		{"of the first process, with its start unknown", me.host, me.boot, 1, 0, 0, false},
		{"of an earlier boot, written before this one", me.host, "0123." + strings.Split(me.boot, ".")[1], me.pid, me.start, 20 * 365 * 24 * time.Hour, true},
		{"of another boot, written just now", me.host, "0123." + strings.Split(me.boot, ".")[1], me.pid, me.start, 0, false},
		{"of another container, recent", me.host, strings.Split(me.boot, ".")[0] + ".1", gone, 1, time.Hour, false},
		{"of another host, recent", "elsewhere", me.boot, gone, 1, 6 * 24 * time.Hour, false},
		{"of another host, old", "elsewhere", me.boot, gone, 1, 8 * 24 * time.Hour, true},
	}
	keep := map[string]string{"note.tmp": "", ".catenrich_not_a_temporary.tmp": "", "dead": "*"}
	for i, c := range cases {
		name := fmt.Sprintf("%s%s_%s_%d_%d_%d%s", temporaryPrefix, c.host, c.boot, c.pid, c.start, i, temporarySuffix)
		o, ok := temporaryOwner(name)
		if !ok {
			t.Fatalf("%s: %s is not read as a temporary", c.name, name)
		}
		if got := o.abandoned(now.Add(-c.age), now); got != c.wantAbandoned {
			t.Errorf("a temporary %s: abandoned is %v, want %v", c.name, got, c.wantAbandoned)
		}
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, nil, 0o666); err != nil {
			t.Fatal(err)
		}
		if err := os.Chtimes(path, now.Add(-c.age), now.Add(-c.age)); err != nil {
			t.Fatal(err)
		}
		if !c.wantAbandoned {
			keep[name] = ""
		}
	}
	for _, name := range []string{"note.tmp", ".catenrich_not_a_temporary.tmp"} {
		if err := os.WriteFile(filepath.Join(dir, name), nil, 0o666); err != nil {
			t.Fatal(err)
		}
	}
	if err := Sweep(OS, dir); err != nil {
		t.Fatal(err)
	}
	entries, _ := os.ReadDir(dir)
	for _, e := range entries {
		if _, ok := keep[e.Name()]; !ok {
			t.Errorf("%s was not swept", e.Name())
		}
		delete(keep, e.Name())
	}
	for name := range keep {
		t.Errorf("%s was swept", name)
	}
	if err := Sweep(OS, filepath.Join(dir, "absent")); err != nil {
		t.Error(err)
	}
}

func TestLock(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "enriched")
	ctx := context.Background()
	first, err := Acquire(ctx, dir, "a/b.csv", false)
	if err != nil || first.Warning != nil {
		t.Fatal(err, first)
	}
	if _, err := Acquire(ctx, dir, "a/b.csv", false); fault.Of(err) != fault.TryAgain {
		t.Fatalf("a held lock gives %v (class %d), want class %d", err, fault.Of(err), fault.TryAgain)
	}
	other, err := Acquire(ctx, dir, "a/c.csv", false)
	if err != nil {
		t.Fatal(err)
	}
	defer other.Release()

	soon, cancel := context.WithTimeout(ctx, 20*time.Millisecond)
	defer cancel()
	if _, err := Acquire(soon, dir, "a/b.csv", true); !errors.Is(err, context.DeadlineExceeded) {
		t.Fatalf("waiting until the context ends gives %v", err)
	}
	got := make(chan error, 1)
	go func() {
		second, err := Acquire(ctx, dir, "a/b.csv", true)
		got <- errors.Join(err, second.Release())
	}()
	time.Sleep(20 * time.Millisecond)
	if err := errors.Join(first.Release(), first.Release(), <-got); err != nil {
		t.Fatal(err)
	}
	entries, _ := os.ReadDir(filepath.Join(dir, LockDir))
	if len(entries) != 2 {
		t.Errorf("%d lock files, want 2 that stay", len(entries))
	}
}
