package guess

import (
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// unitWords are the texts that stand for a unit (the words frames know).
var unitWords = map[string]string{"mm": "mm", "MM": "mm", "in": "in", "IN": "in", "inch": "in", "INCH": "in", `"`: "in"}

// side writes the grammar of what stands before or behind the number, token by
// token: fixed text, unit, channel, or a part that changes for reasons unknown.
func side(p *Proposal, split []parts, front bool) string {
	var rows [][]string
	for _, q := range split {
		text := q.after
		if front {
			text = q.before
		}
		rows = append(rows, tokens(text))
	}
	var s strings.Builder
	unit := false
	for k := range rows[0] {
		var seen []string
		for _, r := range rows {
			if !slices.Contains(seen, r[k]) {
				seen = append(seen, r[k])
			}
		}
		slices.Sort(seen)
		if !front && !unit && allUnits(seen) {
			s.WriteString(unitPattern(p, seen))
			unit = true
			continue
		}
		s.WriteString(tokenPattern(p, seen, front, front && k == 0, len(rows)))
	}
	if !front && !unit {
		assumeUnit(p, split)
	}
	return s.String()
}

func allUnits(seen []string) bool {
	return !slices.ContainsFunc(seen, func(t string) bool { return unitWords[t] == "" })
}

// unitPattern is the group unit, and the words it knows.
func unitPattern(p *Proposal, seen []string) string {
	words := slices.Clone(seen)
	if len(seen) == 1 {
		other := map[string]string{"mm": "in", "in": "mm", "MM": "IN", "IN": "MM", "inch": "mm", "INCH": "MM"}[seen[0]]
		if other != "" {
			words = append(words, other)
			p.unsure("only the unit %s was seen; %s is let pass too, in case of the unit key", seen[0], other)
		}
	}
	for _, w := range words {
		if w != "mm" && w != "in" && w != "inch" && w != `"` {
			if p.Frame.Units == nil {
				p.Frame.Units = map[string]string{}
			}
			p.Frame.Units[w] = unitWords[w]
		}
	}
	p.sure("the frame sends its unit (%s)", strings.Join(seen, ", "))
	for i, w := range words {
		words[i] = regexp.QuoteMeta(w)
	}
	return "(?P<unit>" + strings.Join(words, "|") + ")"
}

// assumeUnit takes millimetres where the frame says nothing.
func assumeUnit(p *Proposal, split []parts) {
	p.Frame.Unit = "mm"
	hint := ""
	if d := len(split[0].decimals); d >= 4 && len(strings.TrimLeft(split[0].digits, "0")) <= 1 {
		hint = fmt.Sprintf(" (%d decimals may mean inches)", d)
	}
	p.unsure("the frame sends no unit: mm is assumed%s; look at the instrument's display", hint)
}

// tokenPattern is the grammar of one token with the texts seen in its place.
// opens is that of a frame's first one.
func tokenPattern(p *Proposal, seen []string, front, opens bool, frames int) string {
	if len(seen) == 1 {
		if kindOf(seen[0]) == 'd' && front {
			p.unsure("%q stands before the number in every frame: fixed text, or a channel number if more instruments share the line", seen[0])
		}
		if kindOf(seen[0]) == 'l' && len(seen[0]) == 1 && !opens {
			p.unsure("%q stands in every frame: fixed text, or a status letter: then write (?P<status>[%s]) in its place, with all letters the manual lists, and add statuses: with their meanings", seen[0], seen[0])
		}
		return regexp.QuoteMeta(seen[0])
	}
	class := classOf(seen)
	if front && (kindOf(seen[0]) == 'd' || kindOf(seen[0]) == 'l' && opens) && len(seen) <= 32 && len(seen)*2 <= frames && !slices.Contains(p.groups, "channel") {
		p.groups = append(p.groups, "channel")
		p.unsure("%s stand before the number by turns: taken as the channels of instruments on one line", strings.Join(seen, ", "))
		return "(?P<channel>" + class + ")"
	}
	if kindOf(seen[0]) == 'b' {
		return class
	}
	return otherGroup(p, seen, class)
}

// otherGroup is a group for texts that stand in one place by turns, of a
// meaning unknown.
func otherGroup(p *Proposal, seen []string, class string) string {
	name := fmt.Sprintf("other%d", len(p.groups)+1)
	p.groups = append(p.groups, name)
	quoted := make([]string, min(len(seen), 6))
	for i := range quoted {
		quoted[i] = strconv.Quote(seen[i])
	}
	p.unsure("%s stand in one place by turns: if they are a status, call the group status in place of %s and add statuses: with their meanings", strings.Join(quoted, ", "), name)
	return "(?P<" + name + ">" + class + ")"
}

// lastMark takes the last character off bodies of one length where it is a
// mark that is no letter or digit in some (such as a blank or an exclamation
// mark); pattern is its group, "" where there is none.
func lastMark(p *Proposal, bodies []string) (pattern string, cut []string) {
	var seen []string
	other := false
	for _, b := range bodies {
		if b == "" || len(b) != len(bodies[0]) || kindOf(b[len(b)-1:]) == 'd' {
			return "", bodies
		}
		last := b[len(b)-1:]
		other = other || kindOf(last) != 'l'
		if !slices.Contains(seen, last) {
			seen = append(seen, last)
		}
	}
	if len(seen) < 2 || len(seen) > 6 || !other {
		return "", bodies
	}
	slices.Sort(seen)
	for _, b := range bodies {
		cut = append(cut, b[:len(b)-1])
	}
	class := ""
	for _, s := range seen {
		if strings.Contains(`\]^-[`, s) {
			s = `\` + s
		}
		class += s
	}
	return otherGroup(p, seen, "["+class+"]"), cut
}

// classOf is the character class and width that covers the texts.
func classOf(seen []string) string {
	lo, hi := 99, 0
	upper, lower := false, false
	for _, t := range seen {
		lo, hi = min(lo, len(t)), max(hi, len(t))
		upper = upper || strings.ToLower(t) != t
		lower = lower || strings.ToUpper(t) != t
	}
	class := ""
	switch kindOf(seen[0]) {
	case 'd':
		class = `\d`
	case 'b':
		class = " "
	case 'l':
		class = "["
		if upper {
			class += "A-Z"
		}
		if lower {
			class += "a-z"
		}
		class += "]"
	default:
		return "[" + regexp.QuoteMeta(strings.Join(seen, "")) + "]"
	}
	switch {
	case lo == hi && hi == 1:
		return class
	case lo == hi:
		return fmt.Sprintf("%s{%d}", class, hi)
	}
	return fmt.Sprintf("%s{%d,%d}", class, lo, hi)
}

// found is a checksum that holds in every frame.
type found struct {
	checksum config.Checksum
	pattern  string
	size     int
}

// leastSums is the number of different frames a checksum must hold in before
// it is believed: by chance one of 8 bits holds in 3 once in 16 million.
const leastSums = 3

// findSum looks for hex digits at the end of every body that are a checksum of
// what stands before, and returns the bodies without them.
func findSum(start string, bodies []string) (*found, []string) {
	for _, size := range []int{4, 2} {
		for _, kind := range []string{"sum8", "xor8", "twos-complement", "crc16"} {
			if (kind == "crc16") != (size == 4) {
				continue
			}
			for _, from := range []int{0, 1} {
				for _, skip := range []int{0, 1} {
					for _, order := range []string{"", "high-first"} {
						if order != "" && kind != "crc16" {
							continue
						}
						if f, cut := trySum(start, bodies, size, kind, from, skip, order); f != nil {
							return f, cut
						}
					}
				}
			}
		}
	}
	return nil, bodies
}

// trySum tests one kind of checksum: over the bytes from the frame's from-th,
// up to skip bytes before the sum. A torn or damaged frame in ten is let pass
// and left out.
func trySum(start string, bodies []string, size int, kind string, from, skip int, order string) (*found, []string) {
	different := map[string]bool{}
	var cut []string
	damaged := 0
	upper, lower := false, false
	for _, b := range bodies {
		whole := start + b
		if len(b) < size+skip+1 {
			damaged++
			continue
		}
		sent := whole[len(whole)-size:]
		if !strings.EqualFold(sent, sumOf([]byte(whole[from:len(whole)-size-skip]), kind, order)) {
			damaged++
			continue
		}
		upper = upper || strings.ContainsAny(sent, "ABCDEF")
		lower = lower || strings.ContainsAny(sent, "abcdef")
		different[b] = true
		cut = append(cut, b[:len(b)-size])
	}
	if len(different) < leastSums || damaged*10 > len(bodies)+9 {
		return nil, nil
	}
	class := "[0-9A-F]"
	if lower {
		class = "[0-9a-f]"
		if upper {
			class = "[0-9A-Fa-f]"
		}
	}
	f := &found{config.Checksum{Kind: kind, Order: order}, fmt.Sprintf("(?P<sum>%s{%d})", class, size), size}
	if from > 0 {
		f.checksum.From = &from
	}
	if skip > 0 {
		to := -size - skip
		f.checksum.To = &to
	}
	return f, cut
}

// sumOf is a checksum as the hex digits that are sent.
func sumOf(p []byte, kind, order string) string {
	var sum, xor byte
	for _, b := range p {
		sum += b
		xor ^= b
	}
	switch kind {
	case "sum8":
		return fmt.Sprintf("%02X", sum)
	case "xor8":
		return fmt.Sprintf("%02X", xor)
	case "twos-complement":
		return fmt.Sprintf("%02X", -sum)
	}
	crc := frame.CRC16(p)
	if order == "high-first" {
		return fmt.Sprintf("%04X", crc)
	}
	return fmt.Sprintf("%02X%02X", byte(crc), byte(crc>>8))
}
