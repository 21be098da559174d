package main

import (
	"errors"
	"os"
	"runtime"
	"runtime/pprof"
	"runtime/trace"

	"github.com/spf13/pflag"

	"catenrich/internal/fault"
)

// profileFlags name files for the measurements of package runtime: where the
// time of a run went, where its memory, and what its goroutines waited for.
// `go tool pprof` and `go tool trace` read them.
type profileFlags struct{ cpu, memory, trace string }

func (p *profileFlags) register(flags *pflag.FlagSet) {
	flags.StringVar(&p.cpu, "cpuprofile", "", "write a profile of processor time to this file (see: go tool pprof)")
	flags.StringVar(&p.memory, "memprofile", "", "write a profile of all allocations to this file (see: go tool pprof)")
	flags.StringVar(&p.trace, "trace", "", "write a trace of the scheduler to this file (see: go tool trace)")
}

// start begins what was asked for. stop, which is never nil, ends it and
// writes the files; it does so after a failed run too.
func (p *profileFlags) start() (stop func() error, err error) {
	var stops []func() error
	stop = func() error {
		var faults []error
		for _, s := range stops {
			faults = append(faults, s())
		}
		return errors.Join(faults...)
	}
	for _, m := range []struct {
		flag, path string
		begin      func(*os.File) (end func() error, err error)
	}{{"cpuprofile", p.cpu, beginCPU}, {"memprofile", p.memory, beginMemory}, {"trace", p.trace, beginTrace}} {
		if m.path == "" {
			continue
		}
		f, err := os.Create(m.path)
		if err != nil {
			return stop, fault.CantCreate.Errorf("--%s: %w", m.flag, err)
		}
		end, err := m.begin(f)
		if err != nil {
			f.Close()
			return stop, fault.Internal.Errorf("--%s: %w", m.flag, err)
		}
		stops = append(stops, func() error {
			if err := errors.Join(end(), f.Close()); err != nil {
				return fault.IO.Errorf("--%s: %w", m.flag, err)
			}
			return nil
		})
	}
	return stop, nil
}

func beginCPU(f *os.File) (func() error, error) {
	return func() error { pprof.StopCPUProfile(); return nil }, pprof.StartCPUProfile(f)
}

// beginMemory profiles the whole run: what the heap holds at its end tells
// little of a program that reuses its buffers.
func beginMemory(f *os.File) (func() error, error) {
	return func() error {
		runtime.GC() // what was freed counts only after a collection
		return pprof.Lookup("allocs").WriteTo(f, 0)
	}, nil
}

func beginTrace(f *os.File) (func() error, error) {
	return func() error { trace.Stop(); return nil }, trace.Start(f)
}
