package frame

import (
	"regexp"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// compare holds the matcher against package regexp on one text.
func compare(t interface{ Fatalf(string, ...any) }, pattern string, text []byte) {
	m, err := newMatcher(pattern, 64)
	if err != nil || len(text) > 64 {
		return
	}
	want := regexp.MustCompile(`\A(?:` + pattern + `)\z`).FindSubmatchIndex(text)
	got := m.match(text)
	if got != (want != nil) {
		t.Fatalf("%q on %q: %v, regexp %v", pattern, text, got, want)
	}
	if got && !slices.Equal(m.cap[2:], want[2:]) {
		t.Fatalf("%q on %q: groups %v, regexp %v", pattern, text, m.cap[2:], want[2:])
	}
}

var patterns = []string{
	`(?P<value>[+-]\d{3}\.\d{3})`, `(?P<value>[+-]?\d+(\.\d*)?) ?(?P<unit>mm|in|inch)?`,
	`(a|ab)(c|bcd)(d*)`, `(a*)(a?)(a+)`, `(a*?)(a*)b?`, `(?:(x)|y)*`, `(?i)MM|in`, `^a$|b`, `\bab\b`, `(?s:.)(.)`,
	`(|a)+`, `(a?)*b`, `[^\n]{2,5}µ?`, `(?m)^a$`, ``, `(\w+),(\w+)`,
}

func TestMatcherAgreesWithRegexp(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		pattern := rapid.SampledFrom(patterns).Draw(t, "pattern")
		text := rapid.SliceOfN(rapid.SampledFrom([]byte("+-01.9 minchMab\ncdxy,\xc2\xb5\x00")), 0, 12).Draw(t, "text")
		compare(t, pattern, text)
		compare(t, pattern, []byte(rapid.StringMatching(`(?:`+pattern+`)`).Draw(t, "match")))
	})
}

func FuzzMatcher(f *testing.F) {
	for _, p := range patterns {
		f.Add(p, []byte("+001.234"))
		f.Add(p, []byte("aab"))
	}
	f.Fuzz(func(t *testing.T, pattern string, text []byte) {
		if len(pattern) > 200 {
			return
		}
		if _, err := regexp.Compile(`\A(?:` + pattern + `)\z`); err != nil {
			return
		}
		if _, err := regexp.Compile(pattern); err != nil {
			return
		}
		compare(t, pattern, text)
	})
}
