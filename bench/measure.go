package main

import (
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"time"
)

// A usage is what one run of a program cost. Times are in seconds.
type usage struct {
	Wall   float64 `json:"wall_s"`
	User   float64 `json:"user_s"`
	System float64 `json:"system_s"`
	Peak   int64   `json:"peak_bytes"` // of resident memory
}

func (u *usage) cpu() float64 { return u.User + u.System }

// A contender does a line's work: its command makes out of in.
type contender struct {
	name    string
	command func(in, out string) *exec.Cmd
	env     []string
}

// once runs a contender and removes what it wrote. What others wrote before is
// on the disk when the clock starts.
func (b *bench) once(c *contender, in, out string) (usage, error) {
	if err := clearOutputs(out); err != nil {
		return usage{}, err
	}
	defer clearOutputs(out)
	return b.timed(c, in, out)
}

// timed runs a contender, and leaves what it wrote.
func (b *bench) timed(c *contender, in, out string) (usage, error) {
	syscall.Sync()
	cmd := c.command(in, out)
	cmd.Env = append(os.Environ(), c.env...)
	var said strings.Builder
	cmd.Stderr = &said
	start := time.Now()
	err := cmd.Run()
	wall := time.Since(start)
	if err != nil {
		return usage{}, fmt.Errorf("%s: %w\n%s", strings.Join(cmd.Args, " "), err, said.String())
	}
	r := cmd.ProcessState.SysUsage().(*syscall.Rusage)
	return usage{wall.Seconds(), seconds(r.Utime), seconds(r.Stime), r.Maxrss << 10}, nil
}

func seconds(t syscall.Timeval) float64 { return float64(t.Sec) + float64(t.Usec)/1e6 }

// clearOutputs removes an output with what stands beside it.
func clearOutputs(out string) error {
	beside, err := filepath.Glob(out + "*")
	for _, path := range append(beside, filepath.Join(filepath.Dir(out), ".catenrich")) {
		if err := os.RemoveAll(path); err != nil {
			return err
		}
	}
	return err
}

// inTurn runs all contenders once in each round, and returns the medians, and
// each contender's cost relative to the first: the median of the rounds'
// ratios, which a load that comes and goes disturbs less than the ratio of
// medians.
func (b *bench) inTurn(all []contender, in, out string) ([]result, error) {
	rounds := make([][]usage, len(all))
	for range b.rounds {
		for i := range all {
			u, err := b.once(&all[i], in, out)
			if err != nil {
				return nil, err
			}
			rounds[i] = append(rounds[i], u)
		}
	}
	results := make([]result, len(all))
	for i := range all {
		r := result{Name: all[i].name, Rounds: rounds[i], usage: medians(rounds[i])}
		var wall, cpu []float64
		for k := range rounds[i] {
			wall = append(wall, rounds[i][k].Wall/rounds[0][k].Wall)
			cpu = append(cpu, rounds[i][k].cpu()/rounds[0][k].cpu())
		}
		r.Ratio, r.CPURatio = median(wall), median(cpu)
		results[i] = r
	}
	return results, nil
}

// medians are those of each quantity, but the largest peak.
func medians(rounds []usage) usage {
	var wall, user, system []float64
	peak := int64(0)
	for _, u := range rounds {
		wall, user, system, peak = append(wall, u.Wall), append(user, u.User), append(system, u.System), max(peak, u.Peak)
	}
	return usage{median(wall), median(user), median(system), peak}
}

func median(v []float64) float64 {
	v = slices.Clone(v)
	slices.Sort(v)
	n := len(v)
	return (v[(n-1)/2] + v[n/2]) / 2
}
