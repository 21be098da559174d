package writers

import (
	"fmt"
	"os"
	"os/exec"
	"runtime"
	"strconv"
	"strings"
	"testing"

	"catenrich/internal/table"
)

// TestMain lets the test binary be its own child: with GRAFT_CHILD set it
// grafts onto that file and exits, so that its peak memory can be measured.
func TestMain(m *testing.M) {
	path := os.Getenv("GRAFT_CHILD")
	if path == "" {
		os.Exit(m.Run())
	}
	f, err := os.Create(path + ".out")
	if err == nil {
		job := graftJob{path: path, want: []string{"c00"}, spec: table.Spec{Added: twelve()}, kernel: smooth, workers: 2}
		_, err = job.run(&fileOutput{f: f})
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	status, err := os.ReadFile("/proc/self/status")
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	// The resource usage that a parent sees begins with the parent's own peak.
	_, peak, _ := strings.Cut(string(status), "VmHWM:")
	fmt.Print(strings.Fields(peak)[0])
	os.Exit(0)
}

// TestFlatMemory: neither the length of a row group nor the number of row
// groups shows in the memory of two workers. With GRAFT_BIG set the files have
// the sizes that the promise names, 20 M rows in one group and 100 000 groups.
func TestFlatMemory(t *testing.T) {
	if runtime.GOOS != "linux" {
		t.Skip("peak memory is read from /proc")
	}
	if raceDetector {
		t.Skip("the race detector's own memory would be measured")
	}
	scale := 20
	if os.Getenv("GRAFT_BIG") != "" {
		scale = 1
	}
	for _, c := range []struct {
		name                 string
		rows, columns, group int
	}{
		{"one row group", 20_000_000 / scale, 2, 20_000_000},
		{"many row groups", 1_000_000 / scale, 8, 10},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := makeBenchFile(t, c.rows, c.columns, c.group)
			child := exec.Command(os.Args[0])
			child.Env = append(os.Environ(), "GRAFT_CHILD="+path)
			child.Stderr = os.Stderr
			out, err := child.Output()
			if err != nil {
				t.Fatal(err)
			}
			kb, err := strconv.Atoi(string(out))
			if err != nil {
				t.Fatal(err)
			}
			mb := kb >> 10
			t.Logf("%d rows in groups of %d: peak %d MB, %v of CPU", c.rows, c.group, mb, child.ProcessState.UserTime()+child.ProcessState.SystemTime())
			if mb > 400 {
				t.Errorf("peak memory is %d MB, want at most 400", mb)
			}
		})
	}
}
