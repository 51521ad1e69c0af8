package main

import (
	"errors"
	"fmt"
	"io"
	"strings"

	"gaugelog/analysis/unitsystem"
)

// Code is an exit code; scripts rely on them.
type Code int

// The exit codes.
const (
	Done    Code = 0 // done
	Failed  Code = 1 // the work failed
	Wrong   Code = 2 // the rig file or the input is wrong
	NotHeld Code = 3 // done, but an evaluation, a limit or an integrity check did not hold
)

// failure is an error with its exit code and, where known, its mend.
type failure struct {
	code Code
	err  error
	mend string
}

func (f *failure) Error() string { return f.err.Error() }
func (f *failure) Unwrap() error { return f.err }
func (f *failure) Mend() string  { return f.mend }

// wrong marks err as the input's fault (exit code 2).
func wrong(err error, mend string) error { return &failure{Wrong, err, mend} }

// wrongf is wrong with a text of its own.
func wrongf(mend, format string, args ...any) error {
	return wrong(fmt.Errorf(format, args...), mend)
}

// failed marks err as failed work (exit code 1) with a mend.
func failed(err error, mend string) error { return &failure{Failed, err, mend} }

// errNotHeld ends a command that printed its whole output but found an
// evaluation, a limit or an integrity check that did not hold.
var errNotHeld = &failure{code: NotHeld, err: errors.New("a check did not hold")}

// mender is an error that knows what to do about itself.
type mender interface{ Mend() string }

// printError writes err the way design and scripts expect and returns its
// exit code, quantities in one of the systems of units. Several errors joined are printed one under the other.
func printError(w io.Writer, units string, err error) Code {
	var held *failure
	if errors.As(err, &held) && held.code == NotHeld {
		return NotHeld
	}
	code := Failed
	for _, e := range flatten(err) {
		fmt.Fprintf(w, "gaugelog: %s\n", unitsystem.Text(units, strings.TrimSpace(e.Error())))
		var m mender
		if errors.As(e, &m) && m.Mend() != "" {
			fmt.Fprintf(w, "mend: %s\n", unitsystem.Text(units, m.Mend()))
		}
		code = max(code, codeOf(e))
	}
	return code
}

// flatten takes joined errors apart, so that each is printed with its mend.
func flatten(err error) []error {
	if j, ok := err.(interface{ Unwrap() []error }); ok {
		var all []error
		for _, e := range j.Unwrap() {
			all = append(all, flatten(e)...)
		}
		return all
	}
	return []error{err}
}

// mendOf is what an error says to do, "" where it says nothing.
func mendOf(err error) string {
	var m mender
	if errors.As(err, &m) {
		return m.Mend()
	}
	return ""
}
