package config

import (
	"fmt"
	"regexp"
)

// checker collects what is wrong with a rig.
type checker struct {
	rig      *Rig
	problems Problems
}

// Check looks at the shape and the ranges of the whole rig, but for ports and
// frames (see CheckPorts). It returns errors, which make the rig unusable and
// which Load therefore refuses, and warnings, in the order of the file's
// lines. A rig made in Go is checked just as well, without lines.
func (r *Rig) Check() []Problem {
	c := &checker{rig: r}
	c.specimen()
	c.supports()
	c.gauges()
	c.loads()
	c.plan()
	c.records()
	c.limits()
	c.alarms()
	c.forward()
	c.problems.sort()
	return c.problems
}

func (c *checker) report(s Severity, path, what, fix string) {
	p := Problem{What: what, Fix: fix, Severity: s}
	if c.rig.source != nil {
		where := c.rig.source.at(path)
		p.File, p.Line, p.Col = where.file, where.line, where.col
	}
	c.problems = append(c.problems, p)
}

func (c *checker) fail(path, what, fix string) { c.report(Error, path, what, fix) }
func (c *checker) warn(path, what, fix string) { c.report(Warning, path, what, fix) }

// missing reports whether the file leaves out the key; never for a rig made in
// Go, where zero may be meant.
func (c *checker) missing(path string) bool {
	return c.rig.source != nil && !c.rig.states(path)
}

// at is the path of item i of a list.
func at(list string, i int) string { return fmt.Sprintf("%s[%d]", list, i) }

var nameText = regexp.MustCompile(`^[a-z0-9][a-z0-9_-]*$`)

// name checks a name and that it stands once; seen maps names to paths.
func (c *checker) name(path, kind, name string, seen map[string]string) {
	switch before, twice := seen[name]; {
	case name == "":
		c.fail(path, kind+" has no name", "give it one, such as name: "+map[string]string{"gauge": "mid", "support": "left", "load": "pan"}[kind])
	case !nameText.MatchString(name):
		c.fail(path, kind+" name "+quoted(name)+" is not of small letters, digits, - and _", "begin with a letter or digit, and use no blanks or capitals")
	case twice:
		c.fail(path, fmt.Sprintf("two %ss are called %s%s", kind, name, c.first(before)), "give each its own name")
	default:
		seen[name] = path
	}
}

func (c *checker) first(path string) string {
	if c.rig.source == nil {
		return ""
	}
	return fmt.Sprintf(" (the first in line %d)", c.rig.source.at(path).line)
}

// oneOf checks a word against the closed list of the key; "" passes, as the
// default does.
func (c *checker) oneOf(path, key, word string, known ...string) {
	if word == "" {
		return
	}
	for _, k := range known {
		if word == k {
			return
		}
	}
	c.fail(path, key+" is "+quoted(word), nearestMend(word, known))
}
