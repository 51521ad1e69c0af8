package wire

import (
	"fmt"
	"math"
	"regexp"
	"regexp/syntax"
	"slices"
	"sort"

	"gaugelog/config"
)

// text writes text frames: the pattern's grammar read backwards.
type text struct {
	start, end string
	parts      []part
	sum        *sum
	request    []byte
	unit       string // what the frame shows where it has no unit group
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
	t := &text{unit: f.Unit, status: map[string]string{}, none: map[string]string{}}
	if t.start, err = escapes(f.Start); err != nil {
		return nil, fmt.Errorf("frame %q: start: %w", f.Name, err)
	}
	if t.end, err = escapes(f.End); err != nil {
		return nil, fmt.Errorf("frame %q: end: %w", f.Name, err)
	}
	if t.request, err = request(f, i.Channel); err != nil {
		return nil, err
	}
	for text, reason := range f.NoReadings {
		if old, has := t.none[reason]; !has || text < old {
			t.none[reason] = text
		}
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

// Append writes one frame.
func (t *text) Append(dst []byte, v *Value) ([]byte, bool) {
	begin := len(dst)
	dst = append(dst, t.start...)
	if v.NoReading != "" {
		said, known := t.none[v.NoReading]
		if !known {
			return dst[:begin], false
		}
		return append(append(dst, said...), t.end...), true
	}
	sumAt := -1
	for i := range t.parts {
		p := &t.parts[i]
		ok := true
		switch p.kind {
		case fixedPart:
			dst = append(dst, p.fixed...)
		case valuePart:
			shown, unit := t.inUnit(v)
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
			said, known := t.status[v.Status]
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

// inUnit is the number to show and its unit: a frame without a unit group
// shows its own unit, whatever the gauge's key says.
func (t *text) inUnit(v *Value) (float64, string) {
	switch {
	case t.unit == "" || t.unit == v.Unit || t.showsUnit():
		return v.Shown, v.Unit
	case t.unit == "in":
		return v.Shown / 25.4, "in"
	}
	return v.Shown * 25.4, "mm"
}

func (t *text) showsUnit() bool {
	return slices.ContainsFunc(t.parts, func(p part) bool { return p.kind == unitPart })
}

// builder turns a pattern's tree into parts.
type builder struct {
	text       *text
	frame      *config.Frame
	instrument Instrument
}

func (b *builder) fix(s string) {
	if s == "" {
		return
	}
	if n := len(b.text.parts); n > 0 && b.text.parts[n-1].kind == fixedPart {
		b.text.parts[n-1].fixed += s
		return
	}
	b.text.parts = append(b.text.parts, part{kind: fixedPart, fixed: s})
}

func (b *builder) walk(re *syntax.Regexp) error {
	switch re.Op {
	case syntax.OpConcat:
		for _, sub := range re.Sub {
			if err := b.walk(sub); err != nil {
				return err
			}
		}
		return nil
	case syntax.OpCapture:
		return b.group(re)
	case syntax.OpAlternate, syntax.OpQuest, syntax.OpStar, syntax.OpPlus, syntax.OpRepeat:
		if hasGroup(re) {
			return b.choose(re)
		}
	}
	s, err := shortest(re)
	b.fix(s)
	return err
}

// choose goes into a choice or repetition that holds a group: the first
// branch, once.
func (b *builder) choose(re *syntax.Regexp) error {
	if re.Op == syntax.OpAlternate {
		for _, sub := range re.Sub {
			if hasGroup(sub) {
				return b.walk(sub)
			}
		}
	}
	before := len(b.text.parts)
	err := b.walk(re.Sub[0])
	if optional := re.Op == syntax.OpQuest || re.Op == syntax.OpStar || re.Op == syntax.OpRepeat && re.Min == 0; optional {
		b.mayBeMissing(b.text.parts[min(before, len(b.text.parts)):])
	}
	return err
}

// mayBeMissing lets an optional unit group say the unit it has no text for by
// saying nothing, as instruments do that print a sign for inches only.
func (b *builder) mayBeMissing(parts []part) {
	if len(parts) != 1 || parts[0].kind != unitPart {
		return
	}
	for _, unit := range []string{"mm", "in"} {
		if _, has := parts[0].units[unit]; !has {
			parts[0].units[unit] = ""
		}
	}
}

func hasGroup(re *syntax.Regexp) bool {
	return re.Op == syntax.OpCapture && re.Name != "" || slices.ContainsFunc(re.Sub, hasGroup)
}

// group writes a named group by its meaning.
func (b *builder) group(re *syntax.Regexp) error {
	if re.Name == "" {
		return b.walk(re.Sub[0])
	}
	whole, err := regexp.Compile("^(?:" + re.Sub[0].String() + ")$")
	if err != nil {
		return err
	}
	p := part{}
	switch re.Name {
	case b.instrument.Temperature:
		p.kind = temperaturePart
		p.number, err = newNumber(whole, 2, true)
	case b.instrument.Humidity:
		p.kind = humidityPart
		p.number, err = newNumber(whole, 1, false)
	case "value":
		p.kind = valuePart
		if p.number, err = newNumber(whole, decimalsOf(b.instrument.Resolution), true); err == nil {
			p.inch, err = newNumber(whole, decimalsOf(b.instrument.InchResolution), true)
		}
	case "unit":
		p.kind = unitPart
		p.units, err = b.units(whole)
	case "channel":
		if !whole.MatchString(b.instrument.Channel) {
			return fmt.Errorf("the channel %q does not fit its group", b.instrument.Channel)
		}
		b.fix(b.instrument.Channel)
		return nil
	case "status":
		p.kind = statusPart
		err = b.statuses(whole, re.Sub[0])
	case "sum":
		if b.text.sum == nil {
			return fmt.Errorf("there is a group sum, but no checksum")
		}
		p.kind = sumPart
	default:
		return b.walk(re.Sub[0])
	}
	if err != nil {
		return fmt.Errorf("group %s: %w", re.Name, err)
	}
	b.text.parts = append(b.text.parts, p)
	return nil
}

// units finds the texts that say mm and in.
func (b *builder) units(whole *regexp.Regexp) (map[string]string, error) {
	out := map[string]string{}
	tries := [][2]string{{"mm", "mm"}, {"in", "in"}, {"MM", "mm"}, {"IN", "in"}}
	for _, text := range sortedKeys(b.frame.Units) {
		tries = append([][2]string{{text, b.frame.Units[text]}}, tries...)
	}
	for _, try := range tries {
		if _, has := out[try[1]]; !has && whole.MatchString(try[0]) {
			out[try[1]] = try[0]
		}
	}
	if len(out) == 0 {
		return nil, fmt.Errorf("no text for mm or in fits; the frame's units may name them")
	}
	return out, nil
}

// statuses finds the texts for the ordinary state and for those named.
func (b *builder) statuses(whole *regexp.Regexp, re *syntax.Regexp) error {
	for _, text := range sortedKeys(b.frame.Statuses) {
		if whole.MatchString(text) {
			b.text.status[b.frame.Statuses[text]] = text
		}
	}
	if _, has := b.text.status[""]; has {
		return nil
	}
	short, err := shortest(re)
	if err != nil {
		return err
	}
	for _, try := range append([]string{"", " ", short}, letters()...) {
		if _, means := b.frame.Statuses[try]; !means && whole.MatchString(try) {
			b.text.status[""] = try
			return nil
		}
	}
	return fmt.Errorf("no text for the ordinary state fits")
}

func letters() []string {
	var out []string
	for c := byte('!'); c <= '~'; c++ {
		out = append(out, string(c))
	}
	return out
}

func sortedKeys(m map[string]string) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

// decimalsOf is how many digits behind the point a resolution needs.
func decimalsOf(resolution float64) int {
	for d := range 8 {
		if scaled := resolution * math.Pow10(d); scaled > 0 && math.Abs(scaled-math.Round(scaled)) < 1e-6*scaled {
			return d
		}
	}
	return 3
}
