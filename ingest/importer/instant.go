package importer

import (
	"fmt"
	"math/big"
	"strings"
	"time"
)

// calendar reads instants as they are written in sheets.
type calendar struct {
	zone  *time.Location
	dates string
	span  *big.Rat // of elapsed time, nil for instants
	start int64
	comma bool
}

// The written forms, by what they need to know. A T between date and time is
// taken for a blank before.
var (
	absolute = []string{"2006-01-02 15:04:05.999999999Z07:00", "2006-01-02 15:04Z07:00", "2006-01-02 15:04:05.999999999 Z07:00",
		"2006-01-02 15:04:05.999999999-0700", "2006-01-02 15:04:05.999999999 -0700"}
	local = []string{"2006-01-02 15:04:05.999999999", "2006-01-02 15:04", "2006/01/02 15:04:05.999999999", "2006/01/02 15:04",
		"2.1.2006 15:04:05.999999999", "2.1.2006 15:04", "2 Jan 2006 15:04:05.999999999", "2 Jan 2006 15:04",
		"2006-01-02", "2.1.2006", "2 Jan 2006"}
	dayFirst   = []string{"2/1/2006 15:04:05.999999999", "2/1/2006 15:04", "2/1/2006 3:04:05 PM", "2/1/2006 3:04 PM", "2/1/2006"}
	monthFirst = []string{"1/2/2006 15:04:05.999999999", "1/2/2006 15:04", "1/2/2006 3:04:05 PM", "1/2/2006 3:04 PM", "1/2/2006"}
)

// parse gives the instant in nanoseconds since 1970 UTC.
func (c *calendar) parse(text string) (int64, error) {
	text = strings.TrimSpace(text)
	if text == "" {
		return 0, fmt.Errorf("the row has no time")
	}
	if c.span != nil {
		return c.elapsed(text)
	}
	if plainDecimal(strings.Replace(text, ",", ".", 1)) && len(text) >= 9 {
		return c.epoch(text)
	}
	written := strings.Join(strings.Fields(text), " ")
	if len(written) > 10 && written[10] == 'T' {
		written = written[:10] + " " + written[11:]
	}
	written = strings.Replace(written, ",", ".", 1)
	for _, form := range absolute {
		if t, err := time.Parse(form, written); err == nil {
			return c.within(t, text)
		}
	}
	forms := local
	switch {
	case c.dates == "day-first":
		forms = append(dayFirst, local...)
	case c.dates == "month-first":
		forms = append(monthFirst, local...)
	case strings.Count(written, "/") == 2 && strings.Index(written, "/") < 3:
		return 0, fmt.Errorf("%q may begin with the day or with the month; say which: --dates day-first or --dates month-first", text)
	}
	for _, form := range forms {
		t, err := time.ParseInLocation(form, written, c.zone)
		if err != nil {
			continue
		}
		if t.Format(form) != canonical(form, written, t) {
			return 0, fmt.Errorf("%q does not exist in %s: the clocks went forward; give times in UTC", text, c.zone)
		}
		for _, d := range []time.Duration{-time.Hour, time.Hour} {
			if t.Add(d).Format("2006-01-02 15:04:05.999999999") == t.Format("2006-01-02 15:04:05.999999999") {
				return 0, fmt.Errorf("%q happened twice in %s: the clocks went back; give times in UTC or with their offset, such as +01:00", text, c.zone)
			}
		}
		return c.within(t, text)
	}
	return 0, fmt.Errorf("%q is no time; write it as 2026-03-02 08:05:00 or 2026-03-02T08:05:00Z", text)
}

// canonical is what a text reads like once parsed where nothing was shifted:
// the same wall clock read in UTC, which has no gaps.
func canonical(form, written string, t time.Time) string {
	u, err := time.Parse(form, written)
	if err != nil {
		return t.Format(form)
	}
	return u.Format(form)
}

// within refuses instants that nanoseconds since 1970 do not hold or that no
// record of a gauge has.
func (c *calendar) within(t time.Time, text string) (int64, error) {
	if y := t.Year(); y < 1900 || y > 2200 {
		return 0, fmt.Errorf("%q lies outside the years 1900 to 2200", text)
	}
	return t.UnixNano(), nil
}

func (c *calendar) elapsed(text string) (int64, error) {
	v, err := parseNumber(text, c.comma)
	if err != nil {
		return 0, err
	}
	ns, ok := wholeNanos(v.Mul(v, c.span))
	if !ok {
		return 0, fmt.Errorf("%q is no time that can have passed", text)
	}
	return c.start + ns, nil
}

// epoch reads a count since 1970 UTC: of seconds, or of ms, us or ns by its
// size.
func (c *calendar) epoch(text string) (int64, error) {
	v, err := parseNumber(text, true)
	if err != nil {
		return 0, err
	}
	whole, _, _ := strings.Cut(strings.Replace(strings.TrimLeft(text, "+-"), ",", ".", 1), ".")
	scale := map[int]int64{9: 1e9, 10: 1e9, 12: 1e6, 13: 1e6, 15: 1e3, 16: 1e3, 18: 1, 19: 1}[len(whole)]
	if scale == 0 {
		return 0, fmt.Errorf("%q is no count of s, ms, us or ns since 1970", text)
	}
	ns, ok := wholeNanos(v.Mul(v, big.NewRat(scale, 1)))
	if !ok {
		return 0, fmt.Errorf("%q is no count of s, ms, us or ns since 1970", text)
	}
	return ns, nil
}

// wholeNanos rounds to whole nanoseconds; false beyond some 200 years.
func wholeNanos(v *big.Rat) (int64, bool) {
	twice := new(big.Rat).Add(new(big.Rat).Mul(v, big.NewRat(2, 1)), big.NewRat(1, 1))
	n := new(big.Int).Div(twice.Num(), new(big.Int).Mul(twice.Denom(), big.NewInt(2)))
	if !n.IsInt64() || n.Int64() > 7.3e18 || n.Int64() < -7.3e18 {
		return 0, false
	}
	return n.Int64(), true
}
