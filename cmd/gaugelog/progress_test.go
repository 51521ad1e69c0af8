package main

import (
	"bytes"
	"strings"
	"testing"

	"github.com/creack/pty"
)

// Work that goes on is told of on a terminal, with what is done of it, and
// nowhere else; without colours, so there is nothing for NO_COLOR to turn off.
func TestWorkingIsToldOnATerminal(t *testing.T) {
	defer func() { barAfter *= 1000 }()
	barAfter /= 1000
	var elsewhere bytes.Buffer
	stop := working(&elsewhere, "checking", 10, func() int64 { return 5 })
	stop()
	if elsewhere.Len() > 0 {
		t.Errorf("no terminal is told %q", elsewhere.String())
	}
	working(nil, "checking", -1, nil)()
	for what, c := range map[string]struct {
		length int64
		done   func() int64
		want   string
	}{
		"a known length": {10, func() int64 { return 5 }, "50%"}, "more than that": {10, func() int64 { return 25 }, "90%"}, "an unknown one": {-1, nil, "checking"},
	} {
		master, terminal, err := pty.Open()
		if err != nil {
			t.Skip("no pseudo-terminal:", err)
		}
		stop := working(terminal, "checking", c.length, c.done)
		var seen strings.Builder
		b := make([]byte, 4096)
		for !strings.Contains(seen.String(), c.want) {
			n, err := master.Read(b)
			if err != nil {
				t.Fatalf("%s: %v after %q", what, err, seen.String())
			}
			seen.Write(b[:n])
		}
		stop()
		stop()
		if strings.Contains(seen.String(), "\x1b[3") {
			t.Errorf("%s: colours in %q", what, seen.String())
		}
		master.Close()
		terminal.Close()
	}
}
