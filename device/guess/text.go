package guess

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// parts is one text frame taken apart at its number.
type parts struct {
	before, lead, digits, point, decimals, after string
}

// text proposes a text frame: the terminator, the number, and what stands
// around it.
func text(c Capture) (Proposal, bool) {
	list, start, end := pieces(c)
	if len(list) == 0 || printable(c.Bytes()) < 0.9 {
		return Proposal{}, false
	}
	p := Proposal{Frame: config.Frame{Kind: "text", Start: string(start), End: string(end)}}
	bodies := make([]string, len(list))
	for i, l := range list {
		bodies[i] = string(l.body)
	}
	sum, bodies := findSum(string(start), bodies)
	summed := len(bodies)
	mark, bodies := lastMark(&p, bodies)
	split, odd := takeApart(bodies)
	if len(split) == 0 {
		return Proposal{}, false
	}
	var around [2]string
	around[0] = side(&p, split, true)
	around[1] = side(&p, split, false)
	around[0] += leadBlanks(split)
	number := numberPattern(&p, split)
	p.Frame.Pattern = around[0] + "(?P<value>" + number + ")" + around[1] + mark
	if sum != nil {
		p.Frame.Pattern += sum.pattern
		p.Frame.Checksum = &sum.checksum
		p.sure("the last %d characters are a checksum (%s): it holds in %d frames", sum.size, sum.checksum.Kind, summed)
	}
	if !decoded(&p, c, start, end) {
		return Proposal{}, false
	}
	p.sure("a frame ends with %q", end)
	tellOdd(&p, odd, len(list))
	var starts []time.Duration
	for _, l := range list {
		starts = append(starts, l.at)
	}
	pace(&p, c, starts)
	p.rank = p.Share * 3
	return p, true
}

// takeApart splits each body at its number; bodies of another shape than most
// are odd.
func takeApart(bodies []string) (split []parts, odd []string) {
	re := numeral
	with := 0
	for _, b := range bodies {
		if numeral.MatchString(b) {
			with++
		}
	}
	if with*2 < len(bodies) {
		re = whole
	}
	shapes := map[string]int{}
	var all []parts
	for _, b := range bodies {
		m := re.FindAllStringSubmatchIndex(b, -1)
		if len(m) == 0 {
			odd = append(odd, b)
			continue
		}
		at := m[0]
		if re == numeral { // the most decimals make the measured value
			for _, k := range m {
				if k[9]-k[8] > at[9]-at[8] {
					at = k
				}
			}
		}
		q := parts{b[:at[0]], b[at[2]:at[3]], b[at[4]:at[5]], b[at[6]:at[7]], b[at[8]:at[9]], b[at[1]:]}
		all = append(all, q)
		shapes[q.shape()]++
	}
	best := ""
	for s, n := range shapes {
		if n > shapes[best] || n == shapes[best] && s < best {
			best = s
		}
	}
	for _, q := range all {
		if q.shape() == best {
			split = append(split, q)
		} else {
			odd = append(odd, q.before+q.lead+q.digits+q.point+q.decimals+q.after)
		}
	}
	return split, odd
}

// shape tells the kinds of characters around the number, which the frames of
// one grammar share.
func (q parts) shape() string {
	var s strings.Builder
	for i, text := range []string{q.before, q.after} {
		for _, t := range tokens(text) {
			s.WriteByte(kindOf(t))
			if kindOf(t) == 'o' {
				s.WriteString(t)
			}
		}
		if i == 0 {
			s.WriteString("#" + q.point)
		}
	}
	return s.String()
}

var tokenRE = regexp.MustCompile(`[A-Za-z]+|\d+| +|[^A-Za-z\d ]`)

func tokens(s string) []string { return tokenRE.FindAllString(s, -1) }

// kindOf is a letter for a token's kind: letters, digits, blanks, other.
func kindOf(t string) byte {
	switch b := t[0]; {
	case b >= '0' && b <= '9':
		return 'd'
	case b == ' ':
		return 'b'
	case b >= 'A' && b <= 'Z' || b >= 'a' && b <= 'z':
		return 'l'
	}
	return 'o'
}

// leadBlanks is the run of blanks that every lead begins with, where something
// stands before it to be separated from; it is taken off the leads.
func leadBlanks(split []parts) string {
	n := 99
	for _, q := range split {
		if q.before == "" {
			return ""
		}
		n = min(n, len(q.lead)-len(strings.TrimLeft(q.lead, " ")))
	}
	for i := range split {
		split[i].lead = split[i].lead[n:]
	}
	return strings.Repeat(" ", n)
}

// numberPattern writes the grammar of the number and says what of it was seen.
func numberPattern(p *Proposal, split []parts) string {
	var leads []string
	var wide, fine []int
	zeros := false
	for _, q := range split {
		if !slices.Contains(leads, q.lead) {
			leads = append(leads, q.lead)
		}
		wide, fine = append(wide, len(q.digits)), append(fine, len(q.decimals))
		zeros = zeros || len(q.digits) > 1 && q.digits[0] == '0'
	}
	var s strings.Builder
	lo, hi := slices.Min(wide), slices.Max(wide)
	field, padded := fieldWidth(split)
	if !padded {
		s.WriteString(signPattern(p, leads))
	}
	switch {
	case padded:
		fmt.Fprintf(&s, `[ \d+-]{%d}`, field)
		p.sure("%d characters before the point, filled up with blanks", field)
		if !strings.Contains(strings.Join(leads, ""), "-") {
			p.unsure("no value below zero was seen: the minus is taken to stand among the blanks before the digits")
		}
	case lo == hi && zeros:
		fmt.Fprintf(&s, `\d{%d}`, hi)
		p.sure("%d digits before the point, filled up with zeros", hi)
	default:
		fmt.Fprintf(&s, `\d{%d,%d}`, min(lo, 1), max(hi, 3))
		p.unsure("%d to %d digits before the point were seen; %d to %d are let pass", lo, hi, min(lo, 1), max(hi, 3))
	}
	if split[0].point == "" {
		p.unsure("there is no decimal point: the number counts whole units as it stands")
		return s.String()
	}
	s.WriteString(regexp.QuoteMeta(split[0].point))
	lo, hi = slices.Min(fine), slices.Max(fine)
	if lo == hi {
		fmt.Fprintf(&s, `\d{%d}`, lo)
		p.sure("%d digits behind the point", lo)
	} else {
		fmt.Fprintf(&s, `\d{%d,%d}`, lo, hi)
		p.unsure("%d to %d digits behind the point, as seen", lo, hi)
	}
	return s.String()
}

// fieldWidth is the number of characters of a field filled up with blanks in
// front of the digits: sign, blanks and digits before the point together.
func fieldWidth(split []parts) (int, bool) {
	blanks := false
	n := len(split[0].lead) + len(split[0].digits)
	for _, q := range split {
		if len(q.lead)+len(q.digits) != n {
			return 0, false
		}
		blanks = blanks || len(q.lead) > 1 && q.lead[0] == ' '
	}
	return n, blanks && len(split) >= 3 && split[0].point != ""
}

// signPattern writes the grammar of the sign from the leads that were seen.
func signPattern(p *Proposal, leads []string) string {
	slices.Sort(leads)
	switch key := strings.Join(leads, "|"); key {
	case "+|-":
		p.sure("a sign always stands before the digits")
		return "[+-]"
	case "+":
		p.unsure("no value below zero was seen: the minus is taken to stand where the plus does")
		return "[+-]"
	case "-":
		p.unsure("only values below zero were seen: a plus, or nothing, is taken to stand where the minus does")
		return "[+-]?"
	case "":
		p.unsure("no value below zero was seen: a minus is taken to stand before the digits")
		return "-?"
	case "|-":
		p.sure("a minus stands before the digits below zero, nothing above")
		return "-?"
	case " |-":
		p.sure("a minus or a blank stands before the digits")
		return "[ -]"
	case " ":
		p.unsure("no value below zero was seen: the minus is taken to stand in place of the blank")
		return "[ -]"
	}
	long, short, minus := 0, 99, false
	for _, l := range leads {
		long, short = max(long, len(l)), min(short, len(l))
		minus = minus || strings.Contains(l, "-")
	}
	if !minus {
		p.unsure("no value below zero was seen: the minus is taken to stand among the blanks before the digits")
	}
	p.sure("the digits are filled up with blanks, %d to %d characters with the sign", short, long)
	return fmt.Sprintf("[ +-]{%d,%d}", min(short, 1), long)
}

// decoded lets the frame package read the capture by the proposal, and says
// whether enough came out.
func decoded(p *Proposal, c Capture, start, end []byte) bool {
	o := frame.Options{Kind: frame.Text, Start: start, End: end, Pattern: p.Frame.Pattern, Unit: unitFor(p.Frame.Unit)}
	for text, unit := range p.Frame.Units {
		if o.Units == nil {
			o.Units = map[string]frame.Unit{}
		}
		o.Units[text] = unitFor(unit)
	}
	if s := p.Frame.Checksum; s != nil {
		o.Checksum = frame.Checksum{Kind: s.Kind, From: s.From, To: s.To, HighFirst: s.Order == "high-first"}
	}
	d, err := frame.New(o)
	if err != nil {
		return false
	}
	all := c.Bytes()
	good := 0
	d.Feed(all, func(f *frame.Frame) {
		if f.Rejected != frame.None || !f.HasValue {
			return
		}
		p.Frames++
		good += f.Size
		if len(p.Values) < shownValues {
			p.Values = append(p.Values, f.Value.String()+" "+f.Unit.String())
		}
	})
	// Bytes before the first terminator and behind the last may be pieces of
	// frames; they count neither way.
	whole := all
	if i := strings.Index(string(all), string(end)); i >= 0 && p.Frames > 1 {
		whole = all[min(i+len(end), len(all)):]
		whole = whole[:strings.LastIndex(string(whole), string(end))+len(end)]
	}
	p.Share = min(1, float64(good)/float64(max(len(whole), 1)))
	return p.Frames > 0
}

func unitFor(name string) frame.Unit {
	switch name {
	case "mm":
		return frame.Millimetre
	case "in":
		return frame.Inch
	}
	return frame.NoUnit
}

// tellOdd lists frames that do not fit.
func tellOdd(p *Proposal, odd []string, all int) {
	p.sure("%d of %d pieces between terminators are frames of one shape", p.Frames, max(all, p.Frames))
	var seen []string
	for _, o := range odd {
		if strings.TrimSpace(o) == "" || slices.Contains(seen, o) || len(seen) == 4 {
			continue
		}
		seen = append(seen, o)
		if strings.ContainsAny(o, "0123456789") {
			p.unsure("%q came too and does not fit: a piece of a frame, or a second kind of frame", o)
		} else {
			p.unsure("%q came too and holds no number: add no_readings: {%q: over-range}, or what the manual says it means", o, strings.TrimSpace(o))
		}
	}
}
