package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gaugelog/config"
)

// splicing is a rig file with values being put in; nothing is on the disk
// before write.
type splicing struct {
	path      string
	old, text []byte
}

// openRig reads a rig file that a command may write values into.
func openRig(path string) (*config.Rig, *splicing, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, nil, wrong(err, "name a rig file; `gaugelog new` writes one")
	}
	rig, err := config.Parse(path, text)
	if err != nil {
		return nil, nil, err
	}
	return rig, &splicing{path: path, old: text, text: text}, nil
}

func (s *splicing) put(path, value string) error {
	text, err := config.Splice(s.text, path, value)
	if err != nil {
		return wrong(fmt.Errorf("%s: %w", s.path, err), "")
	}
	s.text = text
	return nil
}

func (s *splicing) putList(path string, values []string) error {
	text, err := config.SpliceList(s.text, path, values)
	if err != nil {
		return wrong(fmt.Errorf("%s: %w", s.path, err), "")
	}
	s.text = text
	return nil
}

// changed lists the lines that differ, as they were and as they will be.
func (s *splicing) changed() []string {
	was, is := strings.Split(string(s.old), "\n"), strings.Split(string(s.text), "\n")
	for len(was) > 0 && len(is) > 0 && was[0] == is[0] {
		was, is = was[1:], is[1:]
	}
	for len(was) > 0 && len(is) > 0 && was[len(was)-1] == is[len(is)-1] {
		was, is = was[:len(was)-1], is[:len(is)-1]
	}
	var out []string
	if len(was) == len(is) { // each line for itself; those between stay
		for i := range was {
			if was[i] != is[i] {
				out = append(out, "- "+was[i], "+ "+is[i])
			}
		}
		return out
	}
	for _, l := range was {
		out = append(out, "- "+l)
	}
	for _, l := range is {
		out = append(out, "+ "+l)
	}
	return out
}

// write shows what changes, asks on a terminal unless yes, and replaces the
// file in one step. answers are the lines typed.
func (s *splicing) write(cmd *cobra.Command, answers <-chan string, yes bool) error {
	if bytes.Equal(s.old, s.text) {
		fmt.Fprintf(cmd.ErrOrStderr(), "%s says so already; nothing was written\n", s.path)
		return nil
	}
	if _, err := config.Parse(s.path, s.text); err != nil {
		return err
	}
	for _, l := range s.changed() {
		fmt.Fprintln(cmd.ErrOrStderr(), l)
	}
	if !yes && isTerminal(cmd.InOrStdin()) {
		fmt.Fprintf(cmd.ErrOrStderr(), "write this into %s? [y/n] ", s.path)
		if !strings.HasPrefix(strings.ToLower(<-answers), "y") {
			return failed(fmt.Errorf("%s was left as it is", s.path), "answer y, or give --yes")
		}
	}
	if err := s.replace(); err != nil {
		return err
	}
	fmt.Fprintf(cmd.ErrOrStderr(), "wrote %s\n", s.path)
	return nil
}

// replace puts the new text in the file's place, whole or not at all.
func (s *splicing) replace() (err error) {
	path, err := filepath.EvalSymlinks(s.path)
	if err != nil {
		return err
	}
	now, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	if !bytes.Equal(now, s.old) {
		return failed(fmt.Errorf("%s was changed by someone else meanwhile; nothing was written", s.path), "run the command again")
	}
	info, err := os.Stat(path)
	if err != nil {
		return err
	}
	f, err := os.CreateTemp(filepath.Dir(path), ".rig-*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(f.Name()))
		}
	}()
	if _, err := f.Write(s.text); err != nil {
		return errors.Join(err, f.Close())
	}
	if err := errors.Join(f.Chmod(info.Mode().Perm()), f.Sync(), f.Close()); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

func isTerminal(r io.Reader) bool {
	f, ok := r.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}
