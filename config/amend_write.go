package config

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"

	"go.yaml.in/yaml/v3"
)

// AppendAmendment writes one amendment behind those in the file at path, which
// is made where it does not exist, and syncs it to the disk. What is in the
// file already stays as it is, byte for byte, and must be readable; the new
// entry is read back before anything is written. The write replaces the file
// in one step, so that a power cut leaves the old or the new one.
//
// It takes no lock: a caller that may meet another writer holds one.
func AppendAmendment(path string, a Amendment) error {
	old, err := os.ReadFile(path)
	if err != nil && !os.IsNotExist(err) {
		return fmt.Errorf("reading amendments: %w", err)
	}
	before, err := ParseAmendments(path, old)
	if err != nil {
		return err
	}
	if len(before) == 0 && !onlyComments(old) {
		return Problem{File: path, Line: 1, What: "the amendments are written as an empty list in brackets", Fix: "take the brackets [] out, then try again"}
	}
	entry, err := a.entry()
	if err != nil {
		return err
	}
	text := bytes.Clone(old)
	if len(text) > 0 && !bytes.HasSuffix(text, []byte("\n")) {
		text = append(text, '\n')
	}
	text = append(text, entry...)
	after, err := ParseAmendments(path, text)
	if err != nil {
		return err
	}
	if len(after) != len(before)+1 {
		return Problem{File: path, Line: 1, What: "an entry cannot be added to this list", Fix: "write the list with one \"- path: ...\" entry below the other, not in brackets or indented"}
	}
	return replaceFile(path, text)
}

// entry is the amendment as an item of the list.
func (a Amendment) entry() ([]byte, error) {
	value := a.node
	if value == nil {
		value = &yaml.Node{}
		if err := value.Encode(a.Value); err != nil {
			return nil, fmt.Errorf("the value of the amendment cannot be written: %w", err)
		}
	}
	group := &yaml.Node{Kind: yaml.MappingNode}
	add := func(key string, val *yaml.Node) {
		group.Content = append(group.Content, &yaml.Node{Kind: yaml.ScalarNode, Value: key}, val)
	}
	text := func(key, s string) {
		if s != "" {
			add(key, &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Style: yaml.DoubleQuotedStyle, Value: s})
		}
	}
	text("path", a.Path)
	add("value", value)
	text("since", a.Since)
	text("why", a.Why)
	text("by", a.By)
	text("entered", a.Entered)
	out, err := yaml.Marshal(&yaml.Node{Kind: yaml.SequenceNode, Content: []*yaml.Node{group}})
	if err != nil {
		return nil, fmt.Errorf("the amendment cannot be written: %w", err)
	}
	return out, nil
}

// replaceFile writes beside the file, syncs and renames.
func replaceFile(path string, text []byte) error {
	temporary := path + ".new"
	f, err := os.OpenFile(temporary, os.O_WRONLY|os.O_CREATE|os.O_TRUNC, 0o644)
	if err != nil {
		return fmt.Errorf("writing amendments: %w", err)
	}
	_, err = f.Write(text)
	if err == nil {
		err = f.Sync()
	}
	if closeErr := f.Close(); err == nil {
		err = closeErr
	}
	if err == nil {
		err = os.Rename(temporary, path)
	}
	if err != nil {
		_ = os.Remove(temporary)
		return fmt.Errorf("writing amendments: %w", err)
	}
	// The new name must outlive a power cut too. Not every system can sync a
	// folder; those that cannot keep names safe by other means.
	if folder, err := os.Open(filepath.Dir(path)); err == nil {
		_ = folder.Sync()
		_ = folder.Close()
	}
	return nil
}
