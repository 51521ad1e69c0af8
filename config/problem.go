package config

import (
	"fmt"
	"sort"
	"strings"
)

// Severity says whether a problem stops the work.
type Severity int

const (
	// Error makes the rig unusable: LoadRig and Parse refuse it.
	Error Severity = iota
	// Warning is merely doubtful: the rig loads, and check says so.
	Warning
)

// String returns "error" or "warning".
func (s Severity) String() string {
	if s == Warning {
		return "warning"
	}
	return "error"
}

// Problem is one thing wrong with a rig file, an amendment or a typed
// quantity: where it is, what it is and what to do about it. It is an error.
type Problem struct {
	File     string // empty where the text came from no file
	Line     int    // from 1; 0 where no line is known
	Col      int    // from 1, in characters; 0 where no column is known
	What     string // what is wrong, in one sentence without a full stop
	Fix      string // what to do; empty where What says it already
	Severity Severity
}

// Error returns "FILE:LINE:COL: what", leaving out what is not known.
func (p Problem) Error() string {
	if where := p.Where(); where != "" {
		return where + ": " + p.What
	}
	return p.What
}

// Where returns "FILE:LINE:COL", leaving out what is not known.
func (p Problem) Where() string {
	switch {
	case p.Line > 0 && p.Col > 0:
		return fmt.Sprintf("%s:%d:%d", p.File, p.Line, p.Col)
	case p.Line > 0:
		return fmt.Sprintf("%s:%d", p.File, p.Line)
	}
	return p.File
}

// Mend returns what to do, or "" where the message says it already. The
// command line prints it on a line of its own.
func (p Problem) Mend() string { return p.Fix }

// Problems is a list of problems, in order of file and line. It is an error
// that unwraps to each of its problems.
type Problems []Problem

// Error joins the problems' texts, one on a line.
func (ps Problems) Error() string {
	lines := make([]string, len(ps))
	for i, p := range ps {
		lines[i] = p.Error()
	}
	return strings.Join(lines, "\n")
}

// Unwrap gives errors.Is and errors.As each problem in turn.
func (ps Problems) Unwrap() []error {
	errs := make([]error, len(ps))
	for i, p := range ps {
		errs[i] = p
	}
	return errs
}

// Errors returns the problems that stop the work, without the warnings.
func (ps Problems) Errors() Problems {
	var out Problems
	for _, p := range ps {
		if p.Severity == Error {
			out = append(out, p)
		}
	}
	return out
}

// Warnings returns the problems that do not stop the work.
func (ps Problems) Warnings() Problems {
	var out Problems
	for _, p := range ps {
		if p.Severity == Warning {
			out = append(out, p)
		}
	}
	return out
}

// Err returns the list as an error if it holds at least one problem that
// stops the work (all of those, without the warnings), else nil.
func (ps Problems) Err() error {
	if errs := ps.Errors(); len(errs) > 0 {
		return errs
	}
	return nil
}

// sort orders by line within a file, keeping the order of discovery for
// equals; files stay in the order in which they first appear.
func (ps Problems) sort() {
	rank := map[string]int{}
	for _, p := range ps {
		if _, seen := rank[p.File]; !seen {
			rank[p.File] = len(rank)
		}
	}
	sort.SliceStable(ps, func(i, j int) bool {
		a, b := ps[i], ps[j]
		if a.File != b.File {
			return rank[a.File] < rank[b.File]
		}
		if a.Line != b.Line {
			return a.Line < b.Line
		}
		return a.Col < b.Col
	})
}
