package wire

import (
	"fmt"
	"regexp"
	"regexp/syntax"
	"slices"

	"gaugelog/config"
)

// text writes text frames: the pattern's grammar read backwards.
type text struct {
	start, end string
	parts      []part
	sum        *sum
	request    []byte
	unit       string // what the frame shows where it has no unit group
	saysUnit   bool
	status     map[string]string
	none       map[string]string // reason: whole text
}

// part is one stretch of a frame.
type part struct {
	kind   partKind
	fixed  string
	number number
	inch   number // of a value shown in inches
	// units are the texts for mm and in.
	units map[string]string
}

type partKind uint8

const (
	fixedPart partKind = iota
	valuePart
	unitPart
	statusPart
	sumPart
	temperaturePart
	humidityPart
)

func newText(f *config.Frame, i Instrument) (*text, error) {
	tree, err := syntax.Parse(f.Pattern, syntax.Perl)
	if err != nil {
		return nil, fmt.Errorf("frame %q: pattern: %w", f.Name, err)
	}
	t := &text{unit: f.Unit, status: map[string]string{}, none: spoken(f.NoReadings)}
	if t.start, t.end, err = around(f); err != nil {
		return nil, err
	}
	if t.request, err = request(f, i.Channel); err != nil {
		return nil, err
	}
	if f.Checksum != nil && f.Checksum.Kind != "" && f.Checksum.Kind != "none" {
		if t.sum, err = newSum(f.Checksum); err != nil {
			return nil, fmt.Errorf("frame %q: %w", f.Name, err)
		}
	}
	b := builder{text: t, frame: f, instrument: i}
	if err := b.walk(tree); err != nil {
		return nil, fmt.Errorf("frame %q: pattern %q: %w", f.Name, f.Pattern, err)
	}
	t.saysUnit = t.SaysUnit()
	if err := t.checkPattern(f); err != nil {
		return nil, err
	}
	return t, nil
}

// checkPattern tries a few frames on the whole pattern.
func (t *text) checkPattern(f *config.Frame) error {
	whole, err := regexp.Compile("^(?:" + f.Pattern + ")$")
	if err != nil {
		return fmt.Errorf("frame %q: %w", f.Name, err)
	}
	for _, v := range []Value{{Shown: 1.5, Unit: "mm"}, {Shown: -0.25, Unit: "mm", Celsius: 20, Percent: 50}} {
		if t.unit != "" {
			v.Unit = t.unit
		}
		frame, ok := t.Append(nil, &v)
		if !ok {
			return fmt.Errorf("frame %q: the simulator cannot write %g %s in it", f.Name, v.Shown, v.Unit)
		}
		if body := frame[len(t.start) : len(frame)-len(t.end)]; !whole.Match(body) {
			return fmt.Errorf("frame %q: the simulator wrote %q, which its pattern %q does not match", f.Name, body, f.Pattern)
		}
	}
	return nil
}

// Request returns the bytes the instrument answers to.
func (t *text) Request() []byte { return t.request }

// Says tells whether the status group can say a word.
func (t *text) Says(status string) bool { _, known := t.status[status]; return known }

// Ends is how many bytes the terminator has.
func (t *text) Ends() int { return len(t.end) }

// Append writes one frame.
func (t *text) Append(dst []byte, v *Value) ([]byte, bool) {
	begin := len(dst)
	dst = append(dst, t.start...)
	status := v.Status
	if v.NoReading != "" {
		if said, known := t.none[v.NoReading]; known {
			return append(append(dst, said...), t.end...), true
		}
		if status = v.NoReading; !t.Says(status) {
			return dst[:begin], false
		}
	}
	sumAt := -1
	for i := range t.parts {
		p := &t.parts[i]
		ok := true
		switch p.kind {
		case fixedPart:
			dst = append(dst, p.fixed...)
		case valuePart:
			shown, unit := inUnit(v, t.unit, t.saysUnit)
			if unit == "in" {
				dst, ok = p.inch.append(dst, shown)
			} else {
				dst, ok = p.number.append(dst, shown)
			}
		case temperaturePart:
			dst, ok = p.number.append(dst, v.Celsius)
		case humidityPart:
			dst, ok = p.number.append(dst, v.Percent)
		case unitPart:
			said, known := p.units[v.Unit]
			dst, ok = append(dst, said...), known
		case statusPart:
			said, known := t.status[status]
			if !known {
				said = t.status[""]
			}
			dst = append(dst, said...)
		case sumPart:
			sumAt = len(dst) - begin
			dst = append(dst, t.sum.blank...)
		}
		if !ok {
			return dst[:begin], false
		}
	}
	if sumAt >= 0 && !t.sum.put(dst[begin:], sumAt) {
		return dst[:begin], false
	}
	return append(dst, t.end...), true
}

// SaysUnit tells whether a group says the unit.
func (t *text) SaysUnit() bool {
	return slices.ContainsFunc(t.parts, func(p part) bool { return p.kind == unitPart })
}

// Step is the least step of the number in a unit; 0 for a probe.
func (t *text) Step(unit string) float64 {
	for _, p := range t.parts {
		switch {
		case p.kind != valuePart:
		case unit == "in":
			return 1 / p.inch.scale
		default:
			return 1 / p.number.scale
		}
	}
	return 0
}
