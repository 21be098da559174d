// Package fault gives every error that reaches the user a class, and every
// class its exit code of sysexits(3). The package that finds a fault knows its
// class; cmd/catenrich prints the error once and exits with [Code].
package fault

import (
	"errors"
	"fmt"
)

// A Class says what kind of remedy a fault needs. Its value is the exit code.
type Class int

// The classes, by their names in sysexits(3).
const (
	Usage      Class = 64 // the command line is wrong
	Data       Class = 65 // an input's content is wrong, or a proof failed
	NoInput    Class = 66 // an input is absent or unreadable
	Internal   Class = 70 // a fault of catenrich itself
	CantCreate Class = 73 // an output exists and is not ours, or cannot be made
	IO         Class = 74 // reading or writing failed, the disk is full
	TryAgain   Class = 75 // locked by another run, or work is missing
	Config     Class = 78 // the job file asks for what cannot be done
)

// classified is an error with its class.
type classified struct {
	class Class
	err   error
}

func (e *classified) Error() string { return e.err.Error() }
func (e *classified) Unwrap() error { return e.err }

// Errorf formats an error of class c, wrapping as [fmt.Errorf] does.
func (c Class) Errorf(format string, args ...any) error {
	return &classified{c, fmt.Errorf(format, args...)}
}

// Wrap gives err the class c, unless it is nil or has a class already: the
// place that found a fault knows it best.
func (c Class) Wrap(err error) error {
	if err == nil {
		return nil
	}
	if has := new(classified); errors.As(err, &has) {
		return err
	}
	return &classified{c, err}
}

// Of returns the class of err: the outermost one in its chain, [Internal] for
// an error that nobody classified. The result means nothing for a nil error.
func Of(err error) Class {
	if has := new(classified); errors.As(err, &has) {
		return has.class
	}
	return Internal
}
