package segment

import (
	"bytes"
	"flag"
	"math/rand/v2"
	"strings"
	"testing"
	"time"
)

// mutationsFor bounds TestFastPathAgreesOnMutations by time instead of number:
//
//	go test -run AgreesOnMutations -v -timeout 1h ./ingest/segment -mutations 10m
var mutationsFor = flag.Duration("mutations", 0, "how long the fast path is held against the decoder on mutated lines; 0: 60,000 texts")

// mutator makes texts of some lines: of the exact form, nearly so, and spoilt.
type mutator struct {
	rng   *rand.Rand
	names []string
}

func newMutator(seed uint64) *mutator {
	m := &mutator{rng: rand.New(rand.NewPCG(seed, 12)), names: []string{"mid", "a", "seat-l", "seat-right", "0123456", "01234567", "012345678", strings.Repeat("long.", 12) + "name"}}
	return m
}

func (m *mutator) digits(least, most int) string {
	b := make([]byte, least+m.rng.IntN(most-least+1))
	for i := range b {
		b[i] = '0' + byte(m.rng.IntN(10))
	}
	return string(b)
}

func (m *mutator) line() string {
	number := m.digits(1, 1+m.rng.IntN(10))
	if m.rng.IntN(8) > 0 {
		number += "." + m.digits(1, 1+m.rng.IntN(7))
	}
	if m.rng.IntN(4) == 0 {
		number = "-" + number
	}
	stamp := "1790000" + m.digits(12, 12)
	if m.rng.IntN(16) == 0 {
		stamp = m.digits(18, 20)
	}
	name := m.names[m.rng.IntN(len(m.names))]
	if m.rng.IntN(64) == 0 {
		name = m.digits(1, 70)
	}
	return "indication,gauge=" + name + " mm=" + number + " " + stamp + "\n"
}

// spoilers are bytes that mean something to one of the readers, or to their
// arithmetic.
const spoilers = "0159 .,-+=\"\\_/:aexzEZ#\n\r\t\x00\x01\x2f\x3a\x7f\x80\xb0\xff"

func (m *mutator) text() []byte {
	var b []byte
	for range 1 + m.rng.IntN(6) {
		b = append(b, m.line()...)
	}
	for range m.rng.IntN(3) {
		at := m.rng.IntN(len(b))
		c := spoilers[m.rng.IntN(len(spoilers))]
		switch m.rng.IntN(5) {
		case 0:
			b = append(b[:at], b[at+1:]...)
		case 1:
			b = append(b[:at], append([]byte{c}, b[at:]...)...)
		case 2:
			b[at] ^= 1 << m.rng.IntN(8)
		case 3:
			n := min(1+m.rng.IntN(9), len(b)-at) // a piece of another place
			copy(b[at:at+n], b[m.rng.IntN(len(b)-n+1):])
		default:
			b[at] = c
		}
		if len(b) == 0 {
			break
		}
	}
	return b
}

// Texts of several lines, right and spoilt, are read alike by both paths, by
// one interner that remembers what stood in the texts before.
func TestFastPathAgreesOnMutations(t *testing.T) {
	const texts = 60_000
	m := newMutator(1)
	names := newInterner(nil)
	taken, refused, begun := 0, 0, time.Now()
	n := 0
	for ; n < texts && *mutationsFor == 0 || time.Since(begun) < *mutationsFor; n++ {
		text := m.text()
		rows := agreeWith(t, text, names)
		taken += rows
		if rows < bytes.Count(text, []byte("\n")) {
			refused++
		}
		if len(names.names) > 10_000 {
			names = newInterner(nil)
		}
	}
	if taken == 0 || refused == 0 {
		t.Errorf("%d lines taken, %d texts not to their end: that tests nothing", taken, refused)
	}
	t.Logf("%d texts, %d lines taken by the fast path, %d texts not to their end", n, taken, refused)
}
