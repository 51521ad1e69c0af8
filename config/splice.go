package config

import (
	"bytes"
	"errors"
	"fmt"
	"strings"

	"go.yaml.in/yaml/v3"
)

// Splice returns the rig file text with the one scalar at path replaced by
// value (the plain text, such as 139.9 mm; quotes are put around it where YAML
// needs them), leaving every other byte as it is. Where the key is absent it
// is added to its group, and groups on the way to it too. A list or a group is
// not replaced by a scalar: that is an error. What comes out has been read
// again and differs in that value alone.
func Splice(text []byte, path, value string) ([]byte, error) {
	return splice(text, path, &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: value})
}

// SpliceList is Splice for a list of scalars, written on one line. It may
// replace a scalar or a list that stands there.
func SpliceList(text []byte, path string, values []string) ([]byte, error) {
	list := &yaml.Node{Kind: yaml.SequenceNode, Tag: "!!seq"}
	for _, v := range values {
		list.Content = append(list.Content, &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: v})
	}
	return splice(text, path, list)
}

func splice(text []byte, path string, value *yaml.Node) ([]byte, error) {
	root, problem := parseYAML("", text, "a rig file")
	if problem != nil {
		return nil, *problem
	}
	parts, err := parsePath(path)
	if err != nil {
		return nil, err
	}
	var out []byte
	n := root
	for i, part := range parts {
		next, _, err := step(n, part)
		if err != nil {
			return nil, fmt.Errorf("cannot write %s: %w", path, err)
		}
		if next == nil {
			out, err = insert(text, n, parts[i:], value)
			if err != nil {
				return nil, fmt.Errorf("cannot write %s: %w", path, err)
			}
			break
		}
		n = next
	}
	if out == nil {
		if out, err = replace(text, n, value); err != nil {
			return nil, fmt.Errorf("cannot write %s: %w", path, err)
		}
	}
	if err := onlyThat(root, out, parts, value); err != nil {
		return nil, fmt.Errorf("cannot write %s without touching more than that value (%w): write it by hand: %s", path, err, written(value))
	}
	return out, nil
}

// onlyThat reads the new text and compares it with what was meant.
func onlyThat(root *yaml.Node, text []byte, parts []pathPart, value *yaml.Node) error {
	got, problem := parseYAML("", text, "a rig file")
	if problem != nil {
		return *problem
	}
	want := copyNode(root, nil)
	n := want
	for i, part := range parts {
		next, index, err := step(n, part)
		if err != nil {
			return err
		}
		switch last := i == len(parts)-1; {
		case next != nil && last:
			n.Content[index] = value
		case next == nil:
			next = value
			for j := len(parts) - 1; j > i; j-- {
				next = &yaml.Node{Kind: yaml.MappingNode, Content: []*yaml.Node{{Kind: yaml.ScalarNode, Value: parts[j].key}, next}}
			}
			n.Content = append(n.Content, &yaml.Node{Kind: yaml.ScalarNode, Value: part.key}, next)
			return sameTree(want, got)
		}
		n = next
	}
	return sameTree(want, got)
}

// sameTree compares kinds and texts; keys of a group may stand in any order.
func sameTree(a, b *yaml.Node) error {
	if a.Kind != b.Kind || len(a.Content) != len(b.Content) || a.Kind == yaml.ScalarNode && a.Value != b.Value {
		return errors.New("the result reads differently")
	}
	if a.Kind != yaml.MappingNode {
		for i := range a.Content {
			if err := sameTree(a.Content[i], b.Content[i]); err != nil {
				return err
			}
		}
		return nil
	}
	for i := 0; i < len(a.Content); i += 2 {
		other, _, _ := step(b, pathPart{key: a.Content[i].Value})
		if other == nil {
			return errors.New("a key is lost")
		}
		if err := sameTree(a.Content[i+1], other); err != nil {
			return err
		}
	}
	return nil
}

// replace puts value in the place of node n.
func replace(text []byte, n, value *yaml.Node) ([]byte, error) {
	if n.Kind != yaml.ScalarNode && (value.Kind != yaml.SequenceNode || n.Kind != yaml.SequenceNode) {
		return nil, errors.New(kindName(n) + " stands there")
	}
	from, to, err := extent(text, n)
	if err != nil {
		return nil, err
	}
	return edit(text, from, to, written(value)), nil
}

func edit(text []byte, from, to int, put string) []byte {
	out := make([]byte, 0, len(text)+len(put))
	out = append(out, text[:from]...)
	out = append(out, put...)
	return append(out, text[to:]...)
}

// insert adds the rest of a path to group n. In a group in braces it goes
// before the closing brace; in a group of lines behind the last entry that
// ends on a line of its own, else before the first key.
func insert(text []byte, n *yaml.Node, rest []pathPart, value *yaml.Node) ([]byte, error) {
	entry := ""
	for i, part := range rest {
		if part.item {
			return nil, fmt.Errorf("the list that holds %s is not there", part.key)
		}
		entry += scalarText(part.key) + ": "
		if i < len(rest)-1 {
			entry += "{"
		}
	}
	entry += written(value) + strings.Repeat("}", len(rest)-1)
	if n.Kind != yaml.MappingNode {
		return nil, errors.New("it would stand in no group of keys")
	}
	if n.Style&yaml.FlowStyle != 0 || len(n.Content) == 0 {
		_, to, err := extent(text, n)
		if err != nil {
			return nil, err
		}
		if len(n.Content) > 0 {
			entry = ", " + entry
		}
		end := to - 1
		for end > 0 && text[end-1] == ' ' {
			end--
		}
		return edit(text, end, end, entry), nil
	}
	indent := strings.Repeat(" ", n.Column-1)
	newline := "\n"
	if bytes.Contains(text, []byte("\r\n")) {
		newline = "\r\n"
	}
	for i := len(n.Content) - 2; i >= 0; i -= 2 {
		_, to, err := extent(text, n.Content[i+1])
		if err != nil {
			continue
		}
		if eol, ok := restIsComment(text, to); ok {
			return edit(text, eol, eol, newline+indent+entry), nil
		}
	}
	first := offset(text, n.Content[0].Line, n.Content[0].Column)
	return edit(text, first, first, entry+newline+indent), nil
}

// restIsComment finds the end of the line if only blanks and a comment follow.
func restIsComment(text []byte, from int) (eol int, ok bool) {
	line := text[from:]
	if end := bytes.IndexByte(line, '\n'); end >= 0 {
		line = line[:end]
	}
	line = bytes.TrimSuffix(line, []byte("\r"))
	after := bytes.TrimLeft(line, " \t")
	return from + len(line), len(after) == 0 || after[0] == '#' && len(after) < len(line)
}
