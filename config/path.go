package config

import (
	"errors"
	"fmt"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// pathPart is one key, or one item of a list by its name or number.
type pathPart struct {
	key  string
	item bool
}

// parsePath reads gauges[mid].calibration.gain.
func parsePath(path string) ([]pathPart, error) {
	var parts []pathPart
	rest := path
	for rest != "" {
		if strings.HasPrefix(rest, "[") {
			end := strings.IndexByte(rest, ']')
			if end < 2 || len(parts) == 0 {
				return nil, fmt.Errorf("path %s has a bracket without a list before it or a name in it", quoted(path))
			}
			parts = append(parts, pathPart{key: rest[1:end], item: true})
			rest = rest[end+1:]
		} else {
			if len(parts) > 0 {
				dot := strings.HasPrefix(rest, ".")
				if rest = strings.TrimPrefix(rest, "."); !dot || rest == "" {
					return nil, fmt.Errorf("path %s is not made of keys with points between them", quoted(path))
				}
			}
			end := strings.IndexAny(rest, ".[")
			if end < 0 {
				end = len(rest)
			}
			if end == 0 {
				return nil, fmt.Errorf("path %s has an empty key", quoted(path))
			}
			parts = append(parts, pathPart{key: rest[:end]})
			rest = rest[end:]
		}
	}
	if len(parts) == 0 {
		return nil, errors.New("the path is empty")
	}
	return parts, nil
}

// step follows one part of a path; found is nil where a group lacks the key.
// index is where the found node stands among n's contents.
func step(n *yaml.Node, part pathPart) (found *yaml.Node, index int, err error) {
	if part.item {
		return item(n, part.key)
	}
	if n.Kind != yaml.MappingNode {
		return nil, 0, fmt.Errorf("%s stands in no group of keys", part.key)
	}
	for i := 0; i+1 < len(n.Content); i += 2 {
		if n.Content[i].Value == part.key {
			return n.Content[i+1], i + 1, nil
		}
	}
	return nil, 0, nil
}

func item(n *yaml.Node, name string) (*yaml.Node, int, error) {
	if n.Kind != yaml.SequenceNode {
		return nil, 0, fmt.Errorf("[%s] stands behind something that is no list", name)
	}
	var names []string
	found := -1
	for i, it := range n.Content {
		switch has := nameOf(it); {
		case has == name && found >= 0:
			return nil, 0, fmt.Errorf("two items are called %s", name)
		case has == name:
			found = i
		case has != "":
			names = append(names, has)
		}
	}
	if found >= 0 {
		return n.Content[found], found, nil
	}
	if i, err := strconv.Atoi(name); err == nil && i >= 0 && i < len(n.Content) {
		return n.Content[i], i, nil
	}
	if len(names) == 0 {
		return nil, 0, fmt.Errorf("the list has %d items and none called %s", len(n.Content), name)
	}
	return nil, 0, fmt.Errorf("there is no %s in the list (%s)", name, nearestMend(name, names))
}

// put sets the value of an amendment in the tree, adding keys and groups that
// are not there yet.
func (s *source) put(a Amendment) error {
	parts, err := parsePath(a.Path)
	if err != nil {
		return err
	}
	value := a.node
	if value == nil {
		value = &yaml.Node{}
		if err := value.Encode(a.Value); err != nil {
			return fmt.Errorf("its value cannot be written: %w", err)
		}
	}
	value = copyNode(value, nil)
	s.foreign[value] = a.where.file
	n := s.root
	for i, part := range parts {
		last := i == len(parts)-1
		next, index, err := step(n, part)
		if err != nil {
			return err
		}
		switch {
		case next == nil:
			key := &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: part.key, Line: a.where.line, Column: a.where.col}
			s.foreign[key] = a.where.file
			next = value
			if !last {
				next = &yaml.Node{Kind: yaml.MappingNode, Tag: "!!map", Line: a.where.line, Column: a.where.col}
				s.foreign[next] = a.where.file
			}
			n.Content = append(n.Content, key, next)
		case last:
			n.Content[index] = value
		}
		n = next
	}
	return nil
}

// copyNode copies a tree; each is told of every pair, and may be nil.
func copyNode(n *yaml.Node, each func(from, to *yaml.Node)) *yaml.Node {
	c := *n
	c.Content = make([]*yaml.Node, len(n.Content))
	for i, child := range n.Content {
		c.Content[i] = copyNode(child, each)
	}
	if each != nil {
		each(n, &c)
	}
	return &c
}
