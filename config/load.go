package config

import (
	"errors"
	"fmt"
	"os"
	"reflect"
	"strings"

	"github.com/go-viper/mapstructure/v2"
	"github.com/spf13/viper"
	"go.yaml.in/yaml/v3"
)

// keyDelimiter replaces viper's dot, which may stand in a name of the file.
const keyDelimiter = "\x1f"

// largestFile bounds what is read as a rig file or amendments, in bytes.
const largestFile = 4 << 20

// LoadRig reads and checks the rig file at path. The error is a Problems list if
// the file could be read: everything that is wrong with it, by line. What is
// merely doubtful does not stop it; Check tells.
func LoadRig(path string) (*Rig, error) {
	text, err := readFile(path, "a rig file")
	if err != nil {
		return nil, err
	}
	return Parse(path, text)
}

// Parse is LoadRig for a text in memory; name stands for the file in messages.
func Parse(name string, text []byte) (*Rig, error) {
	root, problem := parseYAML(name, text, "a rig file")
	if problem != nil {
		return nil, Problems{*problem}
	}
	return decodeRig(&source{name: name, text: text, root: root})
}

func readFile(path, what string) ([]byte, error) {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, os.ErrNotExist):
		return nil, Problem{File: path, What: "there is no such file", Fix: "check the name; gaugelog new writes a rig file to begin with"}
	case err != nil:
		return nil, fmt.Errorf("reading %s: %w", what, err)
	case info.IsDir():
		return nil, Problem{File: path, What: "this is a folder, and " + what + " is wanted", Fix: "name the file in it, such as rig.yaml"}
	case info.Size() > largestFile:
		return nil, Problem{File: path, What: fmt.Sprintf("%d bytes are too many for %s", info.Size(), what), Fix: "check that it is the right file"}
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("reading %s: %w", what, err)
	}
	return text, nil
}

// decodeRig makes the three passes: the nodes against the types (which finds
// what viper cannot: unknown, repeated and wrongly cased keys, and where they
// stand), viper's decode of what is left, and the checks across keys.
func decodeRig(src *source) (*Rig, error) {
	w := &walker{src: src, file: src.name}
	src.places = map[string]place{}
	tree, ok := w.value(src.root, target{typ: reflect.TypeFor[Rig](), path: ""}).(map[string]any)
	if !ok && len(w.problems) == 0 {
		return nil, errors.New("config: the walk over the file gave no tree")
	}
	rig := &Rig{}
	if err := decodeWithViper(tree, rig, w); err != nil {
		return nil, err
	}
	if len(w.problems) > 0 {
		w.problems.sort()
		return nil, w.problems
	}
	rig.source = src
	rig.fillDefaults()
	if err := Problems(rig.Check()).Err(); err != nil {
		return nil, err
	}
	return rig, nil
}

// decodeWithViper fills out from the tree. Its leaves are nodes of the file,
// so that the hook sees each text as typed, with its case, and can say where a
// wrong one stands; wrong ones are added to the walker's problems.
func decodeWithViper(tree map[string]any, out any, w *walker) error {
	v := viper.NewWithOptions(viper.KeyDelimiter(keyDelimiter))
	if err := v.MergeConfigMap(tree); err != nil {
		return fmt.Errorf("config: %w", err)
	}
	hook := func(from reflect.Value, to reflect.Value) (any, error) {
		l, ok := from.Interface().(*leaf)
		if !ok {
			return from.Interface(), nil
		}
		value, problem := l.convert(to.Type())
		if problem != nil {
			w.problems = append(w.problems, *problem)
			return reflect.Zero(to.Type()).Interface(), nil
		}
		return value, nil
	}
	strict := func(c *mapstructure.DecoderConfig) {
		c.WeaklyTypedInput = false
		c.ErrorUnused = true
	}
	if err := v.Unmarshal(out, viper.DecodeHook(mapstructure.DecodeHookFuncValue(hook)), strict); err != nil {
		return fmt.Errorf("config: decoding what the walk let pass: %w", err)
	}
	return nil
}

// target is what a node is to become.
type target struct {
	typ     reflect.Type
	path    string // gauges[0].calibration.gain
	shown   string // gauges[mid].calibration.gain, for messages
	percent bool
}

// walker compares the nodes of one file with the Go types and builds the tree
// that viper decodes. Where an amendment put a node, file changes with it.
type walker struct {
	src      *source
	file     string
	problems Problems
}

func (w *walker) add(n *yaml.Node, what, fix string) {
	w.problems = append(w.problems, Problem{File: w.file, Line: n.Line, Col: n.Column, What: what, Fix: fix})
}

// enter changes to the file that node n stands in; the result changes back.
func (w *walker) enter(n *yaml.Node) (leave func()) {
	before := w.file
	if file, ok := w.src.foreign[n]; ok {
		w.file = file
	}
	return func() { w.file = before }
}

// value returns the tree for node n; nil where it is wrong, which has then
// been reported.
func (w *walker) value(n *yaml.Node, t target) any {
	defer w.enter(n)()
	w.src.places[t.path] = place{w.file, n.Line, n.Column}
	for t.typ.Kind() == reflect.Pointer {
		t.typ = t.typ.Elem()
	}
	if !w.plain(n, t) {
		return nil
	}
	switch {
	case isLeaf(t.typ, n):
		return &leaf{node: n, file: w.file, target: t, places: w.src.places}
	case t.typ.Kind() == reflect.Slice:
		return w.list(n, t)
	case t.typ.Kind() == reflect.Struct:
		return w.mapping(n, t)
	}
	panic("config: no rule for a rig file's " + t.typ.String())
}

// plain refuses what YAML allows and a rig file has no use for.
func (w *walker) plain(n *yaml.Node, t target) bool {
	switch {
	case n.Kind == yaml.AliasNode || n.Anchor != "":
		w.add(n, "anchors (&) and aliases (*) are not read in this file", "write the value out; a text with & or * in front goes into quotes")
	case n.Style&yaml.TaggedStyle != 0:
		w.add(n, "YAML tags such as "+quoted(n.Tag)+" are not read in this file", "take the tag away; a text with ! in front goes into quotes")
	case n.Kind == yaml.ScalarNode && n.ShortTag() == "!!null":
		w.add(n, display(t)+" has no value", "write one, or take the line out; \"\" is the empty text")
	default:
		return true
	}
	return false
}

func display(t target) string {
	if t.shown == "" {
		return "the file"
	}
	return t.shown
}

// list accepts a single value for a list of one, where the items are scalars.
func (w *walker) list(n *yaml.Node, t target) any {
	elem := t.typ.Elem()
	if n.Kind == yaml.ScalarNode && elemIsScalar(elem) {
		return []any{w.value(n, target{typ: elem, path: t.path + "[0]", shown: t.shown, percent: t.percent})}
	}
	if n.Kind != yaml.SequenceNode {
		w.add(n, display(t)+" is a list, and here is "+kindName(n), "begin each entry with \"- \", or write [ , ] on one line")
		return nil
	}
	out := make([]any, 0, len(n.Content))
	for i, item := range n.Content {
		e := target{typ: elem, path: fmt.Sprintf("%s[%d]", t.path, i), shown: itemShown(t.shown, item, i), percent: t.percent}
		if v := w.value(item, e); v != nil {
			out = append(out, v)
		}
	}
	return out
}

func (w *walker) mapping(n *yaml.Node, t target) any {
	keys := keysOf(t.typ)
	if n.Kind != yaml.MappingNode {
		w.add(n, display(t)+" is a group of keys, and here is "+kindName(n), "write key: value lines under it, or {key: value, ...}; its keys: "+strings.Join(keyNames(keys), ", "))
		return nil
	}
	tree := map[string]any{}
	first := map[string]*yaml.Node{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, val := n.Content[i], n.Content[i+1]
		w.key(key, func() {
			field, ok := keys[key.Value]
			if !ok {
				w.add(key, w.unknownKey(key, t), nearestMend(key.Value, keyNames(keys)))
				return
			}
			if before := first[key.Value]; before != nil {
				w.add(key, fmt.Sprintf("key %s stands twice in %s (first in line %d)", key.Value, display(t), before.Line), "keep one of the two")
				return
			}
			first[key.Value] = key
			e := target{typ: field, path: join(t.path, key.Value), shown: join(t.shown, key.Value), percent: strings.HasSuffix(key.Value, "percent")}
			if v := w.value(val, e); v != nil {
				tree[key.Value] = v
			}
		})
	}
	return tree
}

// key runs f with the file that the key stands in, after refusing keys that
// are no plain text.
func (w *walker) key(key *yaml.Node, f func()) {
	defer w.enter(key)()
	if key.Kind != yaml.ScalarNode || key.ShortTag() == "!!merge" {
		w.add(key, "a key is a plain word", "write key: value")
		return
	}
	f()
}

func (w *walker) unknownKey(key *yaml.Node, t target) string {
	if t.shown == "" {
		return "unknown key " + quoted(key.Value)
	}
	return "unknown key " + quoted(key.Value) + " in " + t.shown
}
