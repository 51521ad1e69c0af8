package config

import (
	"fmt"
	"reflect"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// leaf is a value of the file that one type reads whole: a scalar, or a group
// whose keys are the user's own words.
type leaf struct {
	target
	node   *yaml.Node
	file   string
	places map[string]place
}

var (
	detailsType  = reflect.TypeFor[[]Detail]()
	setType      = reflect.TypeFor[[]SetWeight]()
	wordsType    = reflect.TypeFor[map[string]string]()
	samplingType = reflect.TypeFor[Sampling]()
	anyType      = reflect.TypeFor[any]()
)

// isLeaf reports whether type t reads node n whole.
func isLeaf(t reflect.Type, n *yaml.Node) bool {
	switch t {
	case detailsType, setType, wordsType, anyType:
		return true
	case samplingType:
		return n.Kind == yaml.ScalarNode
	}
	return elemIsScalar(t)
}

// elemIsScalar reports whether a value of type t is written as one scalar.
func elemIsScalar(t reflect.Type) bool {
	switch t.Kind() {
	case reflect.String, reflect.Int, reflect.Bool:
		return true
	}
	_, ok := quantityReader(t)
	return ok
}

// quantityReader returns the reader of a quantity type.
func quantityReader(t reflect.Type) (func(text string, percent bool) (any, *Problem), bool) {
	switch t {
	case reflect.TypeFor[Length]():
		return reader(lengthDim, toLength), true
	case reflect.TypeFor[Mass]():
		return reader(massDim, toMass), true
	case reflect.TypeFor[Force]():
		return reader(forceDim, toForce), true
	case reflect.TypeFor[Stress]():
		return reader(stressDim, toStress), true
	case reflect.TypeFor[Duration]():
		return reader(durationDim, toDuration), true
	case reflect.TypeFor[Temperature]():
		return reader(temperatureDim, toTemperature), true
	case reflect.TypeFor[Compliance]():
		return reader(complianceDim, toCompliance), true
	case reflect.TypeFor[Stiffness]():
		return reader(stiffnessDim, toStiffness), true
	case reflect.TypeFor[Area]():
		return reader(areaDim, toArea), true
	case reflect.TypeFor[SecondMoment]():
		return reader(secondMomentDim, toSecondMoment), true
	case reflect.TypeFor[Size]():
		return reader(sizeDim, toSize), true
	case reflect.TypeFor[Number]():
		return func(text string, percent bool) (any, *Problem) {
			n, problem := parseNumber(text, percent)
			return n, problem
		}, true
	}
	return nil, false
}

func reader[T any](d *dimension, as func(Quantity) T) func(string, bool) (any, *Problem) {
	return func(text string, _ bool) (any, *Problem) {
		q, problem := d.parse(text)
		return as(q), problem
	}
}

func (l *leaf) problem(n *yaml.Node, what, fix string) *Problem {
	return &Problem{File: l.file, Line: n.Line, Col: n.Column, What: what, Fix: fix}
}

// convert reads the node as type t (pointers are for the decoder to make).
func (l *leaf) convert(t reflect.Type) (any, *Problem) {
	for t.Kind() == reflect.Pointer {
		t = t.Elem()
	}
	switch t {
	case detailsType:
		return l.details()
	case setType:
		return l.set()
	case wordsType:
		return l.words()
	case anyType:
		return l.node, nil
	}
	if l.node.Kind != yaml.ScalarNode {
		return nil, l.problem(l.node, l.shown+" is one value, and here is "+kindName(l.node), "write one value behind the colon")
	}
	if t == reflect.TypeFor[Duration]() && l.node.Value == "none" && strings.HasSuffix(l.path, ".silent_after") {
		return Never, nil
	}
	if read, ok := quantityReader(t); ok {
		v, problem := read(l.node.Value, l.percent)
		if problem != nil {
			problem.File, problem.Line, problem.Col = l.file, l.node.Line, l.node.Column
			problem.What = l.shown + ": " + problem.What
		}
		return v, problem
	}
	return l.scalar(t)
}

func (l *leaf) scalar(t reflect.Type) (any, *Problem) {
	text := l.node.Value
	switch {
	case t == samplingType:
		if text == "all" {
			return Sampling{All: true}, nil
		}
		return nil, l.problem(l.node, l.shown+" is "+quoted(text), "write all, {every: 1 s}, or {dense: 1 s, around: 10 min, per_decade: 50, longest: 15 min}")
	case t.Kind() == reflect.String:
		return text, nil
	case t.Kind() == reflect.Int:
		if i, ok := wholeNumber(text); ok {
			return i, nil
		}
		return nil, l.problem(l.node, l.shown+" is a whole number, and here is "+quoted(text), "write digits only, such as 8 (or 0x10 for sixteen)")
	case t.Kind() == reflect.Bool:
		switch text {
		case "true", "false":
			return text == "true", nil
		}
		return nil, l.problem(l.node, l.shown+" is true or false, and here is "+quoted(text), "write true or false")
	}
	panic("config: no reader for " + t.String())
}

// wholeNumber reads a decimal, or a hexadecimal with 0x in front. A leading
// zero is refused: some readers of YAML take it for octal.
func wholeNumber(text string) (int, bool) {
	digits, base := text, 10
	if rest, ok := strings.CutPrefix(text, "0x"); ok {
		digits, base = rest, 16
	} else if plain := strings.TrimPrefix(text, "-"); len(plain) > 1 && plain[0] == '0' {
		return 0, false
	}
	if strings.HasPrefix(digits, "+") || base == 16 && strings.HasPrefix(digits, "-") {
		return 0, false
	}
	i, err := strconv.ParseInt(digits, base, 32)
	return int(i), err == nil
}

func kindName(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "a group of keys"
	case yaml.SequenceNode:
		return "a list"
	}
	return "a single value"
}

// pairs calls f for each key and value of a group with free keys, each a
// scalar; example is an entry as it should be.
func (l *leaf) pairs(example string, f func(key, val *yaml.Node) *Problem) *Problem {
	if l.node.Kind != yaml.MappingNode {
		return l.problem(l.node, l.shown+" is a group of keys, and here is "+kindName(l.node), "write {"+example+", ...}")
	}
	first := map[string]int{}
	for i := 0; i+1 < len(l.node.Content); i += 2 {
		key, val := l.node.Content[i], l.node.Content[i+1]
		if key.Kind != yaml.ScalarNode || val.Kind != yaml.ScalarNode {
			return l.problem(key, "each entry of "+l.shown+" is one word and one value", "write it as "+example)
		}
		if line, twice := first[key.Value]; twice {
			return l.problem(key, fmt.Sprintf("key %s stands twice in %s (first in line %d)", key.Value, l.shown, line), "keep one of the two")
		}
		if val.ShortTag() == "!!null" {
			return l.problem(val, l.shown+"."+key.Value+" has no value", "write one, or take the line out; \"\" is the empty text")
		}
		first[key.Value] = key.Line
		if problem := f(key, val); problem != nil {
			return problem
		}
	}
	return nil
}

func (l *leaf) details() (any, *Problem) {
	out := []Detail{}
	problem := l.pairs(`moisture: "11.2 %"`, func(key, val *yaml.Node) *Problem {
		l.places[join(l.path, key.Value)] = place{l.file, val.Line, val.Column}
		out = append(out, Detail{key.Value, val.Value})
		return nil
	})
	return out, problem
}

func (l *leaf) words() (any, *Problem) {
	out := map[string]string{}
	problem := l.pairs("H: hold", func(key, val *yaml.Node) *Problem {
		l.places[join(l.path, key.Value)] = place{l.file, val.Line, val.Column}
		out[key.Value] = val.Value
		return nil
	})
	return out, problem
}

func (l *leaf) set() (any, *Problem) {
	out := []SetWeight{}
	problem := l.pairs("pan: 12.40 kg", func(key, val *yaml.Node) *Problem {
		l.places[join(l.path, key.Value)] = place{l.file, key.Line, key.Column}
		w, problem := parseWeight(val.Value)
		if problem != nil {
			problem.File, problem.Line, problem.Col = l.file, val.Line, val.Column
			problem.What = l.shown + "." + key.Value + ": " + problem.What
			return problem
		}
		out = append(out, SetWeight{key.Value, w})
		return nil
	})
	return out, problem
}
