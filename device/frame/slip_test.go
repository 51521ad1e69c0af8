package frame_test

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gaugelog/device/frame"
)

// sender makes frames of one description with drawn values, by code of the
// test's own.
type sender struct {
	kindCase
	draw func(r *rand.Rand) (p []byte, want string)
}

func sum(b []byte) (s byte) {
	for _, c := range b {
		s += c
	}
	return s
}

func xor(b []byte) (s byte) {
	for _, c := range b {
		s ^= c
	}
	return s
}

// senders are those of summed8.
func senders() []sender {
	counts := func(guard func([]byte) byte, big bool) func(*rand.Rand) ([]byte, string) {
		return func(r *rand.Rand) ([]byte, string) {
			v := r.IntN(25400) - 12700
			u := uint32(int32(v))
			p := []byte{0xAA, 0x55, byte(u), byte(u >> 8), byte(u >> 16), byte(u >> 24), 0, 0, 0}
			if big {
				p[2], p[3], p[4], p[5] = p[5], p[4], p[3], p[2]
			}
			return append(p, guard(p)), decimalText(v) + " mm"
		}
	}
	return []sender{
		{summed8[0], counts(sum, false)},
		{summed8[1], counts(xor, true)},
		{summed8[2], func(r *rand.Rand) ([]byte, string) {
			v := r.IntN(25400) - 12700
			sign, m := byte(0), v
			if v < 0 {
				sign, m = 8, -v
			}
			bcd := func(n int) byte { return byte(n/10%10<<4 | n%10) }
			p := []byte{0xF0 | sign, bcd(m / 10000), bcd(m / 100), bcd(m), 0x30}
			return append(p, -sum(p)), decimalText(v) + " mm"
		}},
	}
}

func decimalText(thousandths int) string {
	sign := ""
	if thousandths < 0 {
		sign, thousandths = "-", -thousandths
	}
	return fmt.Sprintf("%s%d.%03d", sign, thousandths/1000, thousandths%1000)
}

// faults damage one frame in the ways a line does.
var faults = []struct {
	name string
	do   func(r *rand.Rand, p []byte) []byte
}{
	{"byte lost", func(r *rand.Rand, p []byte) []byte { i := r.IntN(len(p)); return append(p[:i:i], p[i+1:]...) }},
	{"byte added", func(r *rand.Rand, p []byte) []byte {
		i := r.IntN(len(p) + 1)
		return append(append(p[:i:i], byte(r.Uint32())), p[i:]...)
	}},
	{"cut short", func(r *rand.Rand, p []byte) []byte { return p[:r.IntN(len(p))] }},
	{"bytes garbled", func(r *rand.Rand, p []byte) []byte {
		p = bytes.Clone(p)
		for i, n := r.IntN(len(p)), 2+r.IntN(4); n > 0 && i < len(p); i, n = i+1, n-1 {
			p[i] = byte(r.Uint32())
		}
		return p
	}},
}

// The share of damaged frames from which a wrong value comes, between frames
// of drawn values and of a gauge that stands still, with and without pauses.
func TestShareThatSlipsThroughSum8(t *testing.T) {
	each := slipDraws
	if testing.Short() {
		each /= 20
	}
	r := rand.New(rand.NewPCG(1, 2))
	for _, s := range senders() {
		for _, fault := range faults {
			wrong := 0
			for i := range each {
				before, a := s.draw(r)
				p, b := s.draw(r)
				after, c := s.draw(r)
				if i%2 == 0 {
					before, after, a, c = p, p, b, b
				}
				pieces := [][]byte{before, fault.do(r, p), after}
				if i%4 < 2 {
					pieces = [][]byte{before, gap, fault.do(r, p), gap, after}
				}
				for _, g := range heard(s.open(t), pieces...) {
					if g[0] != '!' && g != a && g != b && g != c {
						wrong++
						break
					}
				}
			}
			share := float64(wrong) / float64(each)
			t.Logf("%s, %s: %d of %d slip through", s.name, fault.name, wrong, each)
			expected := float64(each) / 256
			// Garbled bytes match a sum of eight bits once in 256 by chance;
			// the count then scatters by its square root.
			if float64(wrong) > expected+4*math.Sqrt(expected) || (fault.name != "bytes garbled" && share > 1./256) {
				t.Errorf("%s, %s: %d of %d slip through, more than 1 in 256", s.name, fault.name, wrong, each)
			}
		}
	}
}

// Without a checksum only grammar and the place of the next frame guard: the
// share of single-byte faults that read as another value is measured, and
// must not grow.
func TestShareThatSlipsThroughWithoutChecksum(t *testing.T) {
	if testing.Short() {
		t.Skip("a share of all bytes that could be inserted")
	}
	most := map[string][2]float64{ // lost, added or cut; flipped; in per cent
		"binary": {0, 45}, "binary without sync": {0, 100}, "nibbles": {0.1, 60},
		"nibbles least first, low nibble first": {0.1, 60}, "nibbles hex": {0, 30},
		"scpi NR1": {4, 30}, "scpi NR2": {4, 25}, "scpi NR3": {4, 25},
	}
	for _, c := range append(append([]kindCase{}, bare...), spoken...) {
		var total, wrong [2]int
		try := func(which int) func(string, []byte) {
			return func(_ string, p []byte) {
				total[which]++
				if isWrong(heard(c.open(t), c.frame, gap, p, gap, c.frame), c.want) ||
					isWrong(heard(c.open(t), c.frame, p, c.frame), c.want) {
					wrong[which]++
				}
			}
		}
		mutate(c.frame, try(0))
		flips(c.frame, try(1))
		for i, what := range []string{"bytes lost, added or cut", "bits flipped"} {
			share := 100 * float64(wrong[i]) / float64(total[i])
			t.Logf("%s: %s: %d of %d (%.1f %%) read as another value", c.name, what, wrong[i], total[i], share)
			if share > most[c.name][i] {
				t.Errorf("%s: %s: %.1f %% slip through, more than %v %%", c.name, what, share, most[c.name][i])
			}
		}
	}
}

// A gauge that stands still sends the same bytes for ever; where its data hold
// the sync bytes, and no checksum, a stream joined in the middle must not be
// read at the wrong place.
func TestStillGaugeWithSyncInItsData(t *testing.T) {
	o := frame.Options{Kind: frame.Binary, Unit: frame.Millimetre, Binary: &frame.BinaryOptions{
		Length: 6, Sync: []byte{0xAA}, Offset: 1, Width: 4, Type: "signed", Scale: thousand}}
	one := unhex("AA 39 AA 00 00 00")
	c := kindCase{name: "still", o: o, frame: one, want: "43.577 mm"}
	stream := bytes.Repeat(one, 20)
	for from := range one {
		if got := heard(c.open(t), stream[from:]); isWrong(got, c.want) {
			t.Errorf("joined at byte %d: %q", from, got)
		}
		got := heard(c.open(t), stream[from:], gap, one, one, one)
		if isWrong(got, c.want) || count(got, c.want) < 3 {
			t.Errorf("joined at byte %d, then a pause: %q", from, got)
		}
	}
}
