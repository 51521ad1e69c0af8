package evaluate

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"

	"gaugelog/config"
)

// largestRule bounds a rule file, in bytes.
const largestRule = 1 << 20

// ruleName is how rules, numbers and clauses may be called.
var (
	ruleName   = regexp.MustCompile(`^[a-z0-9][a-z0-9_-]*$`)
	numberName = regexp.MustCompile(`^[a-z][a-z0-9_]*$`)
)

// decoder gathers what is wrong with one file.
type decoder struct {
	file     string
	problems config.Problems
}

func (d *decoder) wrong(n *yaml.Node, fix, format string, args ...any) {
	d.problems = append(d.problems, config.Problem{File: d.file, Line: n.Line, Col: n.Column, What: fmt.Sprintf(format, args...), Fix: fix})
}

// Parse decodes and checks one rule file; name stands for it in messages and
// in Rule.Origin. The error is a config.Problems list: everything that is
// wrong, by line and column.
func Parse(name string, text []byte) (*Rule, error) {
	d := &decoder{file: name}
	root := d.document(text)
	if root == nil {
		return nil, d.problems
	}
	r := d.rule(root)
	if len(d.problems) > 0 {
		slices.SortStableFunc(d.problems, func(a, b config.Problem) int {
			if a.Line != b.Line {
				return a.Line - b.Line
			}
			return a.Col - b.Col
		})
		return nil, d.problems
	}
	r.Origin = name
	return r, nil
}

var yamlLine = regexp.MustCompile(`^yaml: (?:line (\d+): )?(.*)$`)

// document returns the single document's mapping, nil if there is none.
func (d *decoder) document(text []byte) *yaml.Node {
	fail := func(line int, what, fix string) *yaml.Node {
		d.problems = append(d.problems, config.Problem{File: d.file, Line: line, What: what, Fix: fix})
		return nil
	}
	if len(text) > largestRule {
		return fail(0, fmt.Sprintf("%d bytes are too many for a rule file", len(text)), "check that it is the right file")
	}
	dec := yaml.NewDecoder(bytes.NewReader(text))
	var doc, more yaml.Node
	if err := dec.Decode(&doc); errors.Is(err, io.EOF) {
		return fail(1, "the file is empty", "RULES.md shows how a rule is written")
	} else if err != nil {
		line, what := 1, err.Error()
		if m := yamlLine.FindStringSubmatch(what); m != nil {
			what = m[2]
			if n, err := strconv.Atoi(m[1]); err == nil {
				line = n
			}
		}
		return fail(line, "this is no YAML: "+what, "correct the line or the one before it")
	}
	if err := dec.Decode(&more); !errors.Is(err, io.EOF) {
		return fail(max(more.Line, 1), "a rule file holds one document", "give each rule a file of its own")
	}
	if len(doc.Content) != 1 {
		return fail(1, "the file is empty", "RULES.md shows how a rule is written")
	}
	return doc.Content[0]
}

// fields visits a mapping's keys; each must be known and stand once.
func (d *decoder) fields(n *yaml.Node, what string, known map[string]func(*yaml.Node), required ...string) {
	if n.Kind != yaml.MappingNode {
		d.wrong(n, "write keys and values", "%s must be a mapping", what)
		return
	}
	seen := map[string]int{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, value := n.Content[i], n.Content[i+1]
		take, ok := known[key.Value]
		switch {
		case key.Kind != yaml.ScalarNode || !ok:
			d.wrong(key, "known here: "+strings.Join(sorted(known), ", "), "unknown key %q in %s", key.Value, what)
		case seen[key.Value] > 0:
			d.wrong(key, "take one of them out", "%q stands here and in line %d", key.Value, seen[key.Value])
		default:
			seen[key.Value] = key.Line
			take(value)
		}
	}
	for _, key := range required {
		if seen[key] == 0 {
			d.wrong(n, "add it; RULES.md shows how", "%s has no %q", what, key)
		}
	}
}

func sorted(known map[string]func(*yaml.Node)) []string {
	var out []string
	for key := range known {
		out = append(out, key)
	}
	slices.Sort(out)
	return out
}

// text stores a scalar that is not empty.
func (d *decoder) text(to *string) func(*yaml.Node) {
	return func(n *yaml.Node) {
		if n.Kind != yaml.ScalarNode || strings.TrimSpace(n.Value) == "" || n.Tag == "!!null" {
			d.wrong(n, "write a text", "a text is wanted here")
			return
		}
		*to = strings.Join(strings.Fields(n.Value), " ")
	}
}

// named stores a scalar that is a name.
func (d *decoder) named(to *string, form *regexp.Regexp) func(*yaml.Node) {
	return func(n *yaml.Node) {
		d.text(to)(n)
		if *to != "" && !form.MatchString(*to) {
			d.wrong(n, "use small letters, digits and "+map[bool]string{true: "_", false: "- or _"}[form == numberName], "%q is no name", *to)
		}
	}
}

// one stores a scalar that must be one of a list.
func one[T ~string](d *decoder, to *T, list []T) func(*yaml.Node) {
	return func(n *yaml.Node) {
		if n.Kind != yaml.ScalarNode || !slices.Contains(list, T(n.Value)) {
			var names []string
			for _, l := range list {
				names = append(names, string(l))
			}
			d.wrong(n, "known: "+strings.Join(names, ", "), "%q is not known here", n.Value)
			return
		}
		*to = T(n.Value)
	}
}

func (d *decoder) bool(to *bool) func(*yaml.Node) {
	return func(n *yaml.Node) {
		if n.Kind != yaml.ScalarNode || n.Tag != "!!bool" {
			d.wrong(n, "write true or false", "%q is neither true nor false", n.Value)
			return
		}
		*to = n.Value == "true"
	}
}

// list visits a sequence's members.
func (d *decoder) list(take func(*yaml.Node)) func(*yaml.Node) {
	return func(n *yaml.Node) {
		if n.Kind != yaml.SequenceNode || len(n.Content) == 0 {
			d.wrong(n, "write a list with one entry or more", "a list is wanted here")
			return
		}
		for _, m := range n.Content {
			take(m)
		}
	}
}
