package wire

import (
	"fmt"
	"math"

	"gaugelog/config"
)

// nibbles writes frames of decimal digits, one to a nibble.
type nibbles struct {
	start, end string
	request    []byte
	count      int
	hex        bool // one character a nibble, else two nibbles a byte
	lowFirst   bool
	fixed      []byte // the frame's nibbles with the header, all else zero
	digits     config.NibbleSpan
	least      bool // least significant digit first
	sign       *field
	point      *field
	unit       *field
	status     *field
	own        string // the unit where no nibble says it
	// decimals are the digits behind the point in mm and in inches.
	decimals map[string]int
	sum      *sum
	sumAt    *int
}

// field is one nibble with the codes for what it says.
type field struct {
	at    int
	codes map[string]byte
}

func newField(c *config.NibbleField) *field {
	if c == nil {
		return nil
	}
	f := &field{at: c.At, codes: map[string]byte{}}
	for _, word := range c.Codes {
		if code, ok := codeOf(c.Codes, word); ok {
			f.codes[word] = code
		}
	}
	return f
}

// say writes a word's code; false where there is none.
func (f *field) say(frame []byte, word string) bool {
	code, ok := f.codes[word]
	frame[f.at] = code
	return ok
}

// ordinary gives the status nibble a code for no status: the one described as
// such, else the lowest that means nothing else.
func (f *field) ordinary(c *config.NibbleField) {
	if _, has := f.codes[""]; has {
		return
	}
	for code := range byte(16) {
		_, upper := c.Codes["0123456789ABCDEF"[code:code+1]]
		_, lower := c.Codes["0123456789abcdef"[code:code+1]]
		if !upper && !lower {
			f.codes[""] = code
			return
		}
	}
}

func newNibbles(f *config.Frame, i Instrument) (*nibbles, error) {
	c := f.Nibbles
	if c == nil {
		return nil, fmt.Errorf("frame %q has no nibbles group", f.Name)
	}
	n := &nibbles{
		count: c.Count, hex: c.Coding == "hex", lowFirst: c.Order == "low-first", digits: c.Digits,
		least: c.Digits.First == "least", own: f.Unit, sign: newField(c.Sign), point: newField(c.Point),
		unit: newField(c.Unit), status: newField(c.Status), fixed: make([]byte, max(0, c.Count)),
	}
	var err error
	if n.start, n.end, err = around(f); err != nil {
		return nil, err
	}
	if n.request, err = request(f, i.Channel); err != nil {
		return nil, err
	}
	if err := n.fits(f); err != nil {
		return nil, fmt.Errorf("frame %q: %w", f.Name, err)
	}
	for at := range len(c.Header) {
		n.fixed[at], _ = nibbleOf(c.Header[at])
	}
	if n.status != nil {
		n.status.ordinary(c.Status)
	}
	if err := n.points(i); err != nil {
		return nil, fmt.Errorf("frame %q: %w", f.Name, err)
	}
	return n, n.guard(f)
}

// fits refuses places outside the frame.
func (n *nibbles) fits(f *config.Frame) error {
	d := n.digits
	switch {
	case n.count < 1 || !n.hex && n.count%2 != 0:
		return fmt.Errorf("%d nibbles do not fill a frame", n.count)
	case d.At < 0 || d.Count < 1 || d.Count > 15 || d.At+d.Count > n.count || len(f.Nibbles.Header) > n.count:
		return fmt.Errorf("digits or header lie outside the frame")
	}
	for _, one := range []*field{n.sign, n.point, n.unit, n.status} {
		if one != nil && (one.at < 0 || one.at >= n.count) {
			return fmt.Errorf("nibble %d does not exist in a frame of %d", one.at, n.count)
		}
	}
	if n.sign != nil && len(n.sign.codes) < 2 {
		return fmt.Errorf("the sign needs a code for + and one for -")
	}
	return nil
}

// points settles how many digits stand behind the point.
func (n *nibbles) points(i Instrument) error {
	n.decimals = map[string]int{"mm": n.digits.Decimals, "in": n.digits.Decimals}
	if n.point == nil {
		return nil
	}
	for unit, want := range map[string]int{"mm": decimalsOf(i.Resolution), "in": decimalsOf(i.InchResolution)} {
		best := -1
		for d := 0; d <= 6; d++ {
			if _, has := n.point.codes["0123456"[d:d+1]]; has && (best < 0 || d <= want || best > want && d < best) {
				best = d
			}
		}
		if best < 0 {
			return fmt.Errorf("the point has no code for a number of digits behind it")
		}
		n.decimals[unit] = best
	}
	return nil
}

// guard adds the checksum: at its place, or behind the nibbles where the
// description gives none. Its form is that of the nibbles unless it says.
func (n *nibbles) guard(f *config.Frame) error {
	if f.Checksum == nil || f.Checksum.Kind == "none" || f.Checksum.Kind == "" {
		return nil
	}
	c := *f.Checksum
	if c.Form == "" && !n.hex {
		c.Form = "binary"
	}
	var err error
	if n.sum, err = newSum(&c); err != nil {
		return fmt.Errorf("frame %q: %w", f.Name, err)
	}
	n.sumAt = c.At
	if frame, ok := n.Append(nil, &Value{Unit: "mm"}); !ok {
		return fmt.Errorf("frame %q: the checksum does not lie in the frame (%x)", f.Name, frame)
	}
	return nil
}

// Request returns the bytes the instrument answers to.
func (n *nibbles) Request() []byte { return n.request }

// SaysUnit tells whether a nibble says the unit.
func (n *nibbles) SaysUnit() bool { return n.unit != nil }

// Step is the least step of a number in a unit.
func (n *nibbles) Step(unit string) float64 { return math.Pow10(-n.decimals[unit]) }

// Says tells whether the status nibble can say a word.
func (n *nibbles) Says(status string) bool {
	if n.status == nil {
		return false
	}
	_, known := n.status.codes[status]
	return known
}

// Ends is how many bytes the terminator has.
func (n *nibbles) Ends() int { return len(n.end) }

// Append writes one frame.
func (n *nibbles) Append(dst []byte, v *Value) ([]byte, bool) {
	var room [64]byte
	frame := append(room[:0], n.fixed...)
	if !n.fill(frame, v) {
		return dst, false
	}
	begin := len(dst)
	dst = append(dst, n.start...)
	dst = n.pack(dst, frame)
	if n.sum != nil {
		at := len(dst) - begin
		if n.sumAt == nil {
			dst = append(dst, n.sum.blank...)
		} else if at = *n.sumAt; at < 0 {
			at += len(dst) - begin
		}
		if at < 0 || at+len(n.sum.blank) > len(dst)-begin || !n.sum.put(dst[begin:], at) {
			return dst[:begin], false
		}
	}
	return append(dst, n.end...), true
}

// fill writes the nibbles.
func (n *nibbles) fill(frame []byte, v *Value) bool {
	shown, unit := inUnit(v, n.own, n.unit != nil)
	decimals, known := n.decimals[unit]
	raw, ok := count(shown, math.Pow10(-decimals))
	if !known || !ok || raw < 0 && n.sign == nil {
		return false
	}
	sign := "+"
	if raw < 0 {
		sign, raw = "-", -raw
	}
	for i := range n.digits.Count {
		at := n.digits.At + n.digits.Count - 1 - i
		if n.least {
			at = n.digits.At + i
		}
		frame[at] = byte(raw % 10)
		raw /= 10
	}
	ok = raw == 0
	if n.sign != nil {
		ok = n.sign.say(frame, sign) && ok
	}
	if n.point != nil {
		ok = n.point.say(frame, "0123456789"[decimals:decimals+1]) && ok
	}
	if n.unit != nil {
		ok = n.unit.say(frame, unit) && ok
	}
	word := v.Status
	if v.NoReading != "" {
		word = v.NoReading
		if n.status == nil {
			return false
		}
	}
	if n.status != nil && !n.status.say(frame, word) {
		ok = n.status.say(frame, "") && v.NoReading == "" && ok
	}
	return ok
}

// pack codes nibbles as bytes.
func (n *nibbles) pack(dst, frame []byte) []byte {
	if n.hex {
		for _, c := range frame {
			dst = append(dst, "0123456789ABCDEF"[c])
		}
		return dst
	}
	for i := 0; i+1 < len(frame); i += 2 {
		first, second := frame[i], frame[i+1]
		if n.lowFirst {
			first, second = second, first
		}
		dst = append(dst, first<<4|second)
	}
	return dst
}
