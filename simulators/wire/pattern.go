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
