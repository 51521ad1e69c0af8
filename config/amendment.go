package config

import (
	"errors"
	"fmt"
	"os"
	"reflect"
	"slices"
	"strings"
	"time"

	"go.yaml.in/yaml/v3"
)

// Amendment is one thing learned or decided after the run began: the value at
// Path counts from Since (or from the beginning, where Since is empty).
//
// Path is the rig file's own: specimen.section.depth,
// gauges[mid].calibration.gain, plan, details.moisture; an item of a list is
// named by its name (or step), or counted from 0. A path that begins with
// decisions is not of the rig: it overrules a decision of the analysis, which
// alone reads it.
type Amendment struct {
	Path string `mapstructure:"path"`
	// Value is the new value as YAML gives it: a string, a number, a list or
	// a group (map[string]any).
	Value   any    `mapstructure:"value"`
	Since   string `mapstructure:"since"` // RFC 3339
	Why     string `mapstructure:"why"`
	By      string `mapstructure:"by"`
	Entered string `mapstructure:"entered"` // RFC 3339
	// Shown is the value's own text as it stands in the file.
	Shown string `mapstructure:"-"`

	node  *yaml.Node // the value; nil for an amendment made in Go
	where place      // of the path
}

// IsDecision reports whether the amendment overrules a decision of the
// analysis instead of changing the rig.
func (a Amendment) IsDecision() bool {
	return a.Path == "decisions" || strings.HasPrefix(a.Path, "decisions.") || strings.HasPrefix(a.Path, "decisions[")
}

// From returns the instant from which the amendment counts; ok is false where
// it counts from the beginning.
func (a Amendment) From() (t time.Time, ok bool) {
	t, err := time.Parse(time.RFC3339, a.Since)
	return t, err == nil
}

// amendmentList gives the walker a group to begin with.
type amendmentList struct {
	Amendments []Amendment `mapstructure:"amendments"`
}

// LoadAmendments reads an amendments file, as strictly as a rig file; the
// error is a Problems list. A file that is not there, or holds no entry, gives
// no amendments and no error.
func LoadAmendments(path string) ([]Amendment, error) {
	if _, err := os.Stat(path); errors.Is(err, os.ErrNotExist) {
		return nil, nil
	}
	text, err := readFile(path, "an amendments file")
	if err != nil {
		return nil, err
	}
	return ParseAmendments(path, text)
}

// ParseAmendments is LoadAmendments for a text in memory.
func ParseAmendments(name string, text []byte) ([]Amendment, error) {
	if onlyComments(text) {
		return nil, nil
	}
	root, problem := parseYAML(name, text, "an amendments file")
	if problem != nil {
		return nil, Problems{*problem}
	}
	src := &source{name: name, text: text, root: root, places: map[string]place{}}
	w := &walker{src: src, file: name}
	list, _ := w.value(root, target{typ: reflect.TypeFor[[]Amendment](), path: "amendments", shown: "amendments"}).([]any)
	var out amendmentList
	if err := decodeWithViper(map[string]any{"amendments": list}, &out, w); err != nil {
		return nil, err
	}
	// With an error found already, places no longer match the items.
	if len(w.problems) == 0 {
		for i := range out.Amendments {
			w.problems = append(w.problems, out.Amendments[i].settle(src, at("amendments", i))...)
		}
	}
	if len(w.problems) > 0 {
		w.problems.sort()
		return nil, w.problems
	}
	return out.Amendments, nil
}

func onlyComments(text []byte) bool {
	for line := range strings.Lines(string(text)) {
		if line = strings.TrimSpace(line); line != "" && line != "---" && !strings.HasPrefix(line, "#") {
			return false
		}
	}
	return true
}

// settle takes over the value's node and checks what the types cannot.
func (a *Amendment) settle(src *source, path string) Problems {
	var found Problems
	fail := func(key, what, fix string) {
		p := src.at(path + key)
		found = append(found, Problem{File: p.file, Line: p.line, Col: p.col, What: what, Fix: fix})
	}
	if a.Path == "" {
		fail("", "the amendment has no path", "add path: and what it changes, such as path: specimen.section.depth")
	} else if _, err := parsePath(a.Path); err != nil {
		fail(".path", err.Error(), "write it as gauges[mid].calibration.gain, specimen.section.depth or details.moisture")
	}
	a.where = src.at(path + ".path")
	if node, ok := a.Value.(*yaml.Node); ok {
		a.node, a.Shown = node, shownText(src.text, node)
		if err := node.Decode(&a.Value); err != nil {
			fail(".value", "the value cannot be read: "+err.Error(), "write it as it would stand in the rig file")
		}
	} else {
		fail("", "the amendment has no value", "add value: as it would stand in the rig file")
	}
	for _, instant := range []struct{ key, text string }{{"since", a.Since}, {"entered", a.Entered}} {
		if _, err := time.Parse(time.RFC3339, instant.text); instant.text != "" && err != nil {
			fail("."+instant.key, instant.key+" "+quoted(instant.text)+" is not an instant", "write it with its offset from UTC, such as 2026-09-14T08:30:00Z or 2026-09-14T09:30:00+01:00")
		}
	}
	if strings.TrimSpace(a.Why) == "" {
		fail("", "the amendment has no reason", "add why: in a few words; the report prints it")
	}
	return found
}

// shownText is the value's own text, for a scalar as typed without quotes.
func shownText(text []byte, n *yaml.Node) string {
	if n.Kind == yaml.ScalarNode {
		return n.Value
	}
	if from, to, err := extent(text, n); err == nil {
		return string(text[from:to])
	}
	out, err := yaml.Marshal(n)
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(out))
}

// Apply returns the rig with the amendments that count from the beginning (no
// since) put in, in their order; decisions and dated ones are left to the
// caller. The rig itself stays as it is. The result is decoded and checked
// like a rig file, so a wrong value is the same error, at its place in the
// amendments file.
func (r *Rig) Apply(list []Amendment) (*Rig, error) {
	return r.apply(list, func(a Amendment) bool { return a.Since == "" })
}

// ApplyAt returns the rig as it is at an instant: with the amendments that
// count from the beginning, then the dated ones whose since is not after the
// instant, in order of since.
func (r *Rig) ApplyAt(list []Amendment, instant time.Time) (*Rig, error) {
	ordered := slices.Clone(list)
	slices.SortStableFunc(ordered, func(a, b Amendment) int {
		ta, _ := a.From()
		tb, _ := b.From()
		return ta.Compare(tb) // the zero time, of a constant one, comes first
	})
	return r.apply(ordered, func(a Amendment) bool {
		from, dated := a.From()
		return !dated && a.Since == "" || dated && !from.After(instant)
	})
}

// Changes returns the instants at which a dated amendment of the rig (not a
// decision) begins to count, ascending, each once.
func Changes(list []Amendment) []time.Time {
	var out []time.Time
	for _, a := range list {
		if from, dated := a.From(); dated && !a.IsDecision() {
			out = append(out, from)
		}
	}
	slices.SortFunc(out, time.Time.Compare)
	return slices.CompactFunc(out, time.Time.Equal)
}

func (r *Rig) apply(list []Amendment, counts func(Amendment) bool) (*Rig, error) {
	if r.source == nil {
		return nil, errors.New("config: amendments apply only to a rig that was read from a file")
	}
	src := &source{name: r.source.name, text: r.source.text, root: copyNode(r.source.root, nil), foreign: map[*yaml.Node]string{}}
	if r.source.foreign != nil {
		src.root = copyNode(r.source.root, func(from, to *yaml.Node) {
			if file, ok := r.source.foreign[from]; ok {
				src.foreign[to] = file
			}
		})
	}
	var problems Problems
	for _, a := range list {
		if a.IsDecision() || !counts(a) {
			continue
		}
		if err := src.put(a); err != nil {
			problems = append(problems, Problem{File: a.where.file, Line: a.where.line, Col: a.where.col,
				What: fmt.Sprintf("amendment of %s: %v", a.Path, err), Fix: "write the path as it stands in the rig file, such as gauges[mid].calibration.gain"})
		}
	}
	if len(problems) > 0 {
		return nil, problems
	}
	return decodeRig(src)
}
