package config

import (
	"bytes"
	"encoding/json"
	"errors"
	"reflect"
	"regexp"

	"go.yaml.in/yaml/v3"
)

// brief names what ParseBrief reads; [] stands for each item of a list.
var brief = map[string]bool{
	"title": true, "specimen": true, "specimen.name": true,
	"gauges": true, "gauges[].name": true, "gauges[].sees": true, "gauges[].sense": true,
	"gauges[].calibration": true, "gauges[].calibration.gain": true,
	"plan": true, "plan[].step": true, "plan[].hold": true,
	"limits": true, "limits.sag": true, "read": true, "read.creep_gauge": true,
}

// ParseBrief is Parse for who only wants to know how a run stands: it reads the
// title, the specimen's name, the gauges' names, what they see, their sense and
// gain, the steps of the plan and how long they are held, the limit on sag and
// the creep gauge, and leaves all else empty. What it leaves out is not checked,
// which is right for a rig file that was recorded by, and about a quarter of the
// work. The rig takes no amendments.
func ParseBrief(name string, text []byte) (*Rig, error) {
	root, problem := parseYAML(name, withoutComments(text), "a rig file")
	if problem != nil {
		return nil, Problems{*problem}
	}
	src := &source{name: name, text: text, root: only(root, "", brief), places: map[string]place{}}
	w := &walker{src: src, file: name}
	tree, ok := w.value(src.root, target{typ: reflect.TypeFor[Rig]()}).(map[string]any)
	if !ok && len(w.problems) == 0 {
		return nil, errors.New("config: the walk over the file gave no tree")
	}
	rig := &Rig{}
	if len(w.problems) == 0 {
		if err := decodeWithViper(tree, rig, w); err != nil {
			return nil, err
		}
	}
	if len(w.problems) > 0 {
		w.problems.sort()
		return nil, w.problems
	}
	if rig.Specimen.Name == "" || len(rig.Gauges) == 0 {
		return Parse(name, text) // which says what is wrong
	}
	for i := range rig.Gauges {
		rig.Gauges[i].fillDefaults()
	}
	return rig, nil
}

// Brief writes what ParseBrief reads of a rig file, with the amendments that
// were applied, as one line of JSON. That is YAML too: ParseBrief reads it as it
// reads the file. Empty for a rig that was not read from a file.
func (r *Rig) Brief() string {
	if r.source == nil {
		return ""
	}
	b, err := json.Marshal(plainValue(only(r.source.root, "", brief)))
	if err != nil {
		panic(err) // texts, lists and groups of them
	}
	return string(b)
}

// plainValue is a node as JSON knows it; every scalar is a text.
func plainValue(n *yaml.Node) any {
	switch n.Kind {
	case yaml.MappingNode:
		out := map[string]any{}
		for i := 0; i+1 < len(n.Content); i += 2 {
			out[n.Content[i].Value] = plainValue(n.Content[i+1])
		}
		return out
	case yaml.SequenceNode:
		out := []any{}
		for _, item := range n.Content {
			out = append(out, plainValue(item))
		}
		return out
	}
	return n.Value
}

// blockText is a value that goes on over the lines below as they stand.
var blockText = regexp.MustCompile(`(?m)[|>][-+0-9]*[ \t]*$`)

// withoutComments empties the lines that are comments whole, which cost the YAML
// reader more than the others; a line's number stays. A text with a value over
// several lines, in which such a line is no comment, stays as it is.
func withoutComments(text []byte) []byte {
	if blockText.Match(text) {
		return text
	}
	out := make([]byte, 0, len(text))
	for line := range bytes.Lines(text) {
		if t := bytes.TrimLeft(line, " "); len(t) > 0 && t[0] == '#' {
			line = line[len(line)-1:]
			if line[0] != '\n' {
				line = nil
			}
		}
		out = append(out, line...)
	}
	return out
}

// only copies a node without the keys that are not wanted.
func only(n *yaml.Node, path string, wanted map[string]bool) *yaml.Node {
	switch n.Kind {
	case yaml.MappingNode:
		out := *n
		out.Content = make([]*yaml.Node, 0, len(n.Content))
		for i := 0; i+1 < len(n.Content); i += 2 {
			if p := join(path, n.Content[i].Value); wanted[p] {
				out.Content = append(out.Content, n.Content[i], only(n.Content[i+1], p, wanted))
			}
		}
		return &out
	case yaml.SequenceNode:
		out := *n
		out.Content = make([]*yaml.Node, len(n.Content))
		for i, item := range n.Content {
			out.Content[i] = only(item, path+"[]", wanted)
		}
		return &out
	}
	return n
}
