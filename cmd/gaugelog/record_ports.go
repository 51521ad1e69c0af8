package main

import (
	"bufio"
	"context"
	"fmt"
	"os"
	"strings"

	"gaugelog/config"
	"gaugelog/device"
)

// openerOf opens the machine's ports, or those a list of "name path" names.
func openerOf(file string) (device.Opener, error) {
	if file == "" {
		return device.SystemOpener{}, nil
	}
	if _, err := listedPorts(file); err != nil {
		return nil, err
	}
	return listedOpener{file: file}, nil
}

// listedPorts reads a list of ports, one "name path" a line; the last line of a
// name counts, so that a port which came back can be added at the end.
func listedPorts(file string) (map[string]string, error) {
	f, err := os.Open(file)
	if err != nil {
		return nil, wrong(err, "give the list that `gaugelog simulate` printed")
	}
	defer f.Close()
	paths := map[string]string{}
	lines := bufio.NewScanner(f)
	for n := 1; lines.Scan(); n++ {
		fields := strings.Fields(lines.Text())
		if len(fields) == 0 {
			continue
		}
		if len(fields) != 2 {
			return nil, wrongf(`write "name path" a line`, "%s:%d: %q is not two words", file, n, lines.Text())
		}
		paths[fields[0]] = fields[1]
	}
	return paths, lines.Err()
}

// listedOpener opens ports at the paths of a list, others by their own name.
// The list is read anew at each opening, as an identity is looked up anew: a
// port that came back under another name is found once the list says so.
type listedOpener struct {
	file   string
	system device.SystemOpener
}

// Open opens the port behind a name. A list that cannot be read just now is
// like a port that is not there: it is tried again.
func (o listedOpener) Open(ctx context.Context, name string, line config.Line) (device.Port, error) {
	paths, err := listedPorts(o.file)
	if err != nil {
		return nil, fmt.Errorf("looking up %s: %w", name, err)
	}
	if path, ok := paths[name]; ok {
		name = path
	}
	return o.system.Open(ctx, name, line)
}

// Check refuses a name that will never do, as the system's opener does.
func (o listedOpener) Check(name string) error {
	paths, err := listedPorts(o.file)
	if err != nil {
		return err
	}
	if path, ok := paths[name]; ok {
		name = path
	}
	return o.system.Check(name)
}
