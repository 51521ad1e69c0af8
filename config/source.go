package config

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"reflect"
	"regexp"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// source is the text a rig was decoded from, and where each value stands.
type source struct {
	name string
	text []byte
	root *yaml.Node
	// foreign names the file of nodes that an amendment put into the tree.
	foreign map[*yaml.Node]string
	// places maps a path (gauges[0].at) to where its value stands.
	places map[string]place
}

type place struct {
	file      string
	line, col int
}

// at returns where the value of path stands, or the nearest group around it.
func (s *source) at(path string) place {
	for {
		if p, ok := s.places[path]; ok {
			return p
		}
		cut := strings.LastIndexAny(path, ".[")
		if cut < 0 {
			return place{s.name, s.root.Line, s.root.Column}
		}
		path = path[:cut]
	}
}

var yamlLine = regexp.MustCompile(`^yaml: (?:line (\d+): )?(.*)$`)

// parseYAML returns the single document's top node.
func parseYAML(name string, text []byte, what string) (*yaml.Node, *Problem) {
	if len(text) > largestFile {
		return nil, &Problem{File: name, What: fmt.Sprintf("%d bytes are too many for %s", len(text), what), Fix: "check that it is the right file"}
	}
	dec := yaml.NewDecoder(bytes.NewReader(text))
	var doc, more yaml.Node
	if err := dec.Decode(&doc); errors.Is(err, io.EOF) {
		return nil, &Problem{File: name, Line: 1, What: "the file is empty", Fix: "gaugelog new writes a rig file to begin with"}
	} else if err != nil {
		return nil, yamlProblem(name, text, err)
	}
	if err := dec.Decode(&more); err == nil {
		return nil, &Problem{File: name, Line: more.Line, Col: more.Column, What: "a second document begins here (---)", Fix: "keep one document in the file"}
	} else if !errors.Is(err, io.EOF) {
		return nil, yamlProblem(name, text, err)
	}
	if len(doc.Content) != 1 {
		return nil, &Problem{File: name, Line: 1, What: "the file is empty", Fix: "gaugelog new writes a rig file to begin with"}
	}
	return doc.Content[0], nil
}

// yamlProblem words an error of the YAML reader.
func yamlProblem(name string, text []byte, err error) *Problem {
	p := &Problem{File: name, What: "this is not YAML: " + err.Error(),
		Fix: "look at this line and the one above: a missing colon, blank, quote or bracket, or an indent that does not match"}
	if hit := yamlLine.FindStringSubmatch(err.Error()); hit != nil {
		p.Line, _ = strconv.Atoi(hit[1])
		p.What = "this is not YAML: " + hit[2]
	}
	if lines := strings.Split(string(text), "\n"); p.Line > 0 && p.Line <= len(lines) {
		if strings.Contains(p.What, "cannot start any token") || strings.HasPrefix(lines[p.Line-1], "\t") {
			if col := strings.IndexByte(lines[p.Line-1], '\t'); col >= 0 {
				p.Col = len([]rune(lines[p.Line-1][:col])) + 1
				p.Fix = "indent with blanks, never with tabs"
			}
		}
	}
	return p
}

// keysOf returns the keys a group may hold, with the type of each.
func keysOf(t reflect.Type) map[string]reflect.Type {
	keys := map[string]reflect.Type{}
	for i := range t.NumField() {
		tag := t.Field(i).Tag.Get("mapstructure")
		if tag != "" && tag != "-" {
			keys[tag] = t.Field(i).Type
		}
	}
	return keys
}

func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// itemShown names an item of a list by its name where it has one, for a
// person does not count gauges from zero.
func itemShown(list string, item *yaml.Node, i int) string {
	if name := nameOf(item); name != "" {
		return fmt.Sprintf("%s[%s]", list, name)
	}
	return fmt.Sprintf("%s[%d]", list, i)
}

// nameOf returns the value of an item's name (or step) key, "" if it has none.
func nameOf(item *yaml.Node) string {
	if item.Kind != yaml.MappingNode {
		return ""
	}
	for i := 0; i+1 < len(item.Content); i += 2 {
		key, val := item.Content[i].Value, item.Content[i+1]
		if (key == "name" || key == "step") && val.Kind == yaml.ScalarNode && val.Value != "" {
			return val.Value
		}
	}
	return ""
}
