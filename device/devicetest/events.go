package devicetest

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"
	"time"

	"gaugelog/config"
)

// Event is one event of a capture.
type Event struct {
	At   time.Duration // since the capture began
	What string        // "open" | "lost" | "<" | ">" | "line"
	Port string
	// Bytes came from ("<") or went to (">") the instrument.
	Bytes []byte
	// Line is the setting the port was opened with, of a "line" event.
	Line config.Line
}

// LineComment is the comment that tells a capture's readers at which setting a
// port was opened; it belongs behind its "open" event, and playback skips it.
func LineComment(port string, l config.Line) string {
	return fmt.Sprintf("# line %s %d %d %s %s", port, l.Baud, l.DataBits, l.Parity, l.StopBits)
}

// ReadCapture reads all events of a capture in their order. The error names
// the line that is none of a capture's.
func ReadCapture(r io.Reader) ([]Event, error) {
	var out []Event
	lines := bufio.NewScanner(r)
	lines.Buffer(nil, 1<<20)
	var last time.Duration
	for n := 1; lines.Scan(); n++ {
		text := lines.Text()
		if n == 1 && text != captureHead {
			return nil, fmt.Errorf("capture:1: the first line is not %q", captureHead)
		}
		fields := strings.Fields(text)
		if e, ok := lineEvent(fields); ok {
			e.At = last
			out = append(out, e)
			continue
		}
		if len(fields) == 0 || strings.HasPrefix(text, "#") {
			continue
		}
		one := Playback{ports: map[string][]event{}}
		if err := one.add(fields); err != nil {
			return nil, fmt.Errorf("capture:%d: %w", n, err)
		}
		e := one.ports[fields[2]][0]
		last = e.at
		out = append(out, Event{At: e.at, What: e.what, Port: fields[2], Bytes: e.p})
	}
	return out, lines.Err()
}

// lineEvent reads what LineComment writes.
func lineEvent(f []string) (Event, bool) {
	if len(f) != 7 || f[0] != "#" || f[1] != "line" {
		return Event{}, false
	}
	baud, err1 := strconv.Atoi(f[3])
	bits, err2 := strconv.Atoi(f[4])
	e := Event{What: "line", Port: f[2], Line: config.Line{Baud: baud, DataBits: bits, Parity: f[5], StopBits: f[6]}}
	return e, err1 == nil && err2 == nil
}
