package config

import (
	"encoding/hex"
	"fmt"
	"slices"
	"strings"
)

// frames checks every frame the file describes: what its kind requires, what
// it forbids, and each value's range.
func (c *checker) frames() {
	seen := map[string]string{}
	for i := range c.rig.Frames {
		f, p := &c.rig.Frames[i], at("frames", i)
		c.name(p+".name", "frame", f.Name, seen)
		if !slices.Contains([]string{"text", "nibbles", "binary", "modbus", "scpi"}, f.Kind) {
			if f.Kind == "" {
				c.fail(p, "frame "+f.Name+" has no kind", "add kind: text, nibbles, binary, modbus or scpi")
			}
			c.oneOf(p+".kind", "kind of frame "+f.Name, f.Kind, "text", "nibbles", "binary", "modbus", "scpi")
			continue
		}
		c.foreignKeys(p, f)
		c.line(p+".line", &f.Line)
		c.asking(p, f)
		c.words(p, f)
		switch f.Kind {
		case "text":
			c.textFrame(p, f)
		case "nibbles":
			c.nibbles(p, f)
		case "binary":
			c.binary(p, f)
		case "modbus":
			c.modbus(p, f)
		case "scpi":
			c.scpi(p, f)
		}
		if f.Checksum != nil {
			c.checksum(p+".checksum", f)
		} else if f.Kind == "text" && slices.Contains(groupsOf(f.Pattern), "sum") {
			c.fail(p, "frame "+f.Name+" has a group sum in its pattern and no checksum", "add checksum: {kind: ...} as the manual says, or rename the group")
		}
	}
}

// foreignKeys refuses what belongs to frames of another kind.
func (c *checker) foreignKeys(p string, f *Frame) {
	for _, k := range []struct {
		key   string
		set   bool
		kinds string
	}{
		{"start", f.Start != "", "text nibbles"}, {"end", f.End != "", "text nibbles scpi"}, {"pattern", f.Pattern != "", "text"},
		{"request", f.Request != "", "text nibbles binary"}, {"button", f.Button, "text nibbles binary"},
		{"units", len(f.Units) > 0, "text"}, {"statuses", len(f.Statuses) > 0, "text"}, {"no_readings", len(f.NoReadings) > 0, "text scpi"},
		{"checksum", f.Checksum != nil, "text nibbles binary"},
		{"nibbles", f.Nibbles != nil, "nibbles"}, {"binary", f.Binary != nil, "binary"},
		{"modbus", f.Modbus != nil, "modbus"}, {"scpi", f.SCPI != nil, "scpi"},
	} {
		if k.set && !slices.Contains(strings.Fields(k.kinds), f.Kind) {
			c.fail(p+"."+k.key, "a "+f.Kind+" frame has no "+k.key, "take it out of frame "+f.Name+", or correct its kind")
		}
	}
}

func (c *checker) line(p string, l *Line) {
	usual := []int{110, 300, 600, 1200, 2400, 4800, 9600, 14400, 19200, 28800, 38400, 57600, 115200, 230400, 460800, 921600}
	switch {
	case l.Baud == 0 && !c.rig.states(p+".baud"):
	case l.Baud < 50 || l.Baud > 4000000:
		c.fail(p+".baud", fmt.Sprintf("no serial line runs at %d baud", l.Baud), "write the baud of the instrument's manual, such as 9600")
	case !slices.Contains(usual, l.Baud):
		c.warn(p+".baud", fmt.Sprintf("%d baud is not a usual rate; not every port can do it", l.Baud), "check it against the instrument's manual")
	}
	if (l.DataBits != 0 || c.rig.states(p+".data_bits")) && (l.DataBits < 5 || l.DataBits > 8) {
		c.fail(p+".data_bits", fmt.Sprintf("%d data bits do not exist", l.DataBits), "write 7 or 8 (5 and 6 exist on old lines)")
	}
	c.oneOf(p+".parity", "parity", l.Parity, "none", "even", "odd", "mark", "space")
	c.oneOf(p+".stop_bits", "stop_bits", l.StopBits, "1", "1.5", "2")
	c.oneOf(p+".dtr", "dtr", l.DTR, "on", "off")
	c.oneOf(p+".rts", "rts", l.RTS, "on", "off")
}

// asking checks request, every, timeout and button.
func (c *checker) asking(p string, f *Frame) {
	c.positive(p+".every", "every", f.Every, "500 ms")
	c.positive(p+".timeout", "timeout", f.Timeout, "300 ms")
	if f.Button && f.Request != "" {
		c.fail(p+".button", "frame "+f.Name+" is both asked (request) and sent on a button", "keep request or button")
	}
	if !f.Asked() {
		for _, k := range []struct {
			key string
			set bool
		}{{"every", f.Every != nil}, {"timeout", f.Timeout != nil}} {
			if k.set {
				c.fail(p+"."+k.key, "frame "+f.Name+" has "+k.key+", but nothing is asked of the instrument", "add request: and its bytes, or take "+k.key+" out: the instrument streams")
			}
		}
		return
	}
	if f.Every != nil && f.Timeout != nil && f.Timeout.Value > f.Every.Value {
		c.warn(p+".timeout", "frame "+f.Name+" waits longer for an answer (timeout) than from one question to the next (every)", "make timeout shorter than every")
	}
}

// words checks units, statuses and the bytes around a frame.
func (c *checker) words(p string, f *Frame) {
	c.oneOf(p+".unit", "unit of frame "+f.Name, f.Unit, "mm", "in")
	for _, text := range sortedKeys(f.Units) {
		unit := f.Units[text]
		c.oneOf(p+".units."+text, "what "+quoted(text)+" stands for", unit, "mm", "in")
	}
	for _, text := range sortedKeys(f.Statuses) {
		status := f.Statuses[text]
		c.status(p+".statuses."+text, status)
	}
	for _, k := range []struct{ key, text string }{{"start", f.Start}, {"end", f.End}, {"request", f.Request}} {
		if strings.ContainsFunc(k.text, func(r rune) bool { return r > 0x7f }) {
			c.fail(p+"."+k.key, k.key+" of frame "+f.Name+" holds a character beyond ASCII, which is more than one byte", `write bytes from 80 on as '\xHH', in single quotes`)
		}
	}
	if f.Longest < 0 || f.Longest > 1<<16 || c.rig.states(p+".longest") && f.Longest < 2 {
		c.fail(p+".longest", "longest must lie between 2 and 65536 bytes", "256 is usual")
	}
}

// statusWords are the meanings a status may have; "" is the ordinary state.
func statusWords() []string {
	return []string{"hold", "battery-low", "over-range", "under-range", "high-limit", "low-limit", "error"}
}

func (c *checker) status(path, word string) {
	c.oneOf(path, "status", word, statusWords()...)
}

func (c *checker) textFrame(p string, f *Frame) {
	if f.End == "" {
		c.fail(p, "frame "+f.Name+" has no end", `add end: "\r\n" in double quotes, or what the manual calls the terminator`)
	}
	c.pattern(p, f)
	groups := groupsOf(f.Pattern)
	for _, k := range []struct {
		key, group string
		set        bool
	}{{"units", "unit", len(f.Units) > 0}, {"statuses", "status", len(f.Statuses) > 0}} {
		if k.set && !slices.Contains(groups, k.group) {
			c.fail(p+"."+k.key, k.key+" of frame "+f.Name+" have no effect: its pattern has no group "+k.group, "add (?P<"+k.group+">...) to the pattern, or take "+k.key+" out")
		}
	}
}

func (c *checker) scpi(p string, f *Frame) {
	if f.SCPI == nil || f.SCPI.Query == "" {
		c.fail(p, "frame "+f.Name+" is scpi and has no query", "add scpi: {query: \"READ?\"}, after the instrument's manual")
		return
	}
	if !strings.HasSuffix(strings.TrimSpace(f.SCPI.Query), "?") && !strings.Contains(f.SCPI.Query, "? ") {
		c.warn(p+".scpi.query", "query "+quoted(f.SCPI.Query)+" has no question mark: the instrument may not answer", "queries end with ?, such as READ?")
	}
	c.scale(p+".scpi.scale", f.SCPI.Scale)
}

func (c *checker) scale(path string, s *Number) {
	if s != nil && s.Value == 0 {
		c.fail(path, "scale is zero", "write what one count is worth: shown = raw * scale")
	}
}

func (c *checker) modbus(p string, f *Frame) {
	m := f.Modbus
	if m == nil {
		c.fail(p, "frame "+f.Name+" is modbus and has no modbus group", "add modbus: {function: holding, register: 0, type: int32, scale: 0.001}")
		return
	}
	p += ".modbus"
	if m.Function == "" || m.Type == "" {
		c.fail(p, "modbus of frame "+f.Name+" needs function and type", "add function: holding or input, and type: int16, uint16, int32, uint32 or float32")
	}
	c.oneOf(p+".function", "function", m.Function, "holding", "input")
	c.oneOf(p+".type", "type", m.Type, "int16", "uint16", "int32", "uint32", "float32")
	c.oneOf(p+".word_order", "word_order", m.WordOrder, "high-first", "low-first")
	if m.Address != nil && (*m.Address < 1 || *m.Address > 247) {
		c.fail(p+".address", fmt.Sprintf("bus address %d does not exist", *m.Address), "write the address the instrument is set to, from 1 to 247")
	}
	for _, r := range []struct {
		key    string
		number *int
	}{{"register", &m.Register}, {"status", m.Status}} {
		if r.number != nil && (*r.number < 0 || *r.number > 65535) {
			c.fail(p+"."+r.key, fmt.Sprintf("%s %d does not exist", r.key, *r.number), "registers count from 0 to 65535; a manual's 40001 is holding register 0")
		}
	}
	if m.Status != nil && (*m.Status-m.Register > 120 || m.Register-*m.Status > 120) {
		c.fail(p+".status", "the status register is too far from the value's: one request reads at most 125 registers", "leave status out")
	}
	if len(m.StatusBits) > 0 && m.Status == nil {
		c.fail(p+".status_bits", "status_bits has no effect without status", "add status: and its register")
	}
	for _, bit := range sortedKeys(m.StatusBits) {
		word := m.StatusBits[bit]
		if n, ok := wholeNumber(bit); !ok || n < 0 || n > 15 {
			c.fail(p+".status_bits."+bit, "bit "+quoted(bit)+" does not exist", "bits count from 0 (lowest) to 15")
		}
		c.status(p+".status_bits."+bit, word)
	}
	if line := f.Line; line.DataBits != 0 && line.DataBits != 8 {
		c.fail(p, "modbus RTU needs 8 data bits", "set line: {data_bits: 8}")
	}
	c.scale(p+".scale", m.Scale)
}

// hexBytes counts the bytes of a text of hex digits; ok is false if it is none.
func hexBytes(s string) (n int, ok bool) {
	b, err := hex.DecodeString(strings.ReplaceAll(s, " ", ""))
	return len(b), err == nil
}
