package frame_test

import (
	"bytes"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"gaugelog/device/frame"
)

// The mutation campaign feeds every decoder with freshly damaged streams and
// holds what comes out against an oracle that reads each frame by itself:
//
//   - nothing panics, and what is pending stays within bounds;
//   - a frame that counts is one by its grammar and its checksum, and is read
//     as the oracle reads it;
//   - frames tile the bytes, and do not depend on how they were split;
//   - no single flipped bit gives a wrong value under a checksum, no single
//     lost or added byte and no cut in text of exact width; what slips through
//     elsewhere is counted, and bounded where a checksum bounds it.
//
// The campaign of 100 million executions:
//
//	nice go test -tags campaign -run TestMutations -timeout 6h -v ./device/frame
var (
	mutations    = flag.Int("mutations", usualMutations, "executions of the mutation campaign, all decoders together")
	mutationSeed = flag.Uint64("mutations.seed", 1, "what the campaign draws from")
)

// everyDecoder lists the test frames of all kinds, text included.
func everyDecoder() []kindCase {
	var all []kindCase
	for _, g := range golden {
		o := g.o
		o.Kind = frame.Text
		all = append(all, kindCase{"text " + g.name, o, []byte(g.frame), g.want})
	}
	for _, s := range summed {
		o := s.o
		o.Kind = frame.Text
		all = append(all, kindCase{"text " + s.name, o, []byte(s.body + s.sum(s.body) + "\r\n"), s.want})
	}
	return append(all, everyKind()...)
}

func TestMutations(t *testing.T) {
	cases := everyDecoder()
	each := (*mutations + len(cases) - 1) / len(cases)
	if testing.Short() {
		each /= 50
	}
	var stray [][]byte
	for _, c := range cases {
		stray = append(stray, c.frame)
	}
	total := 0
	began := time.Now()
	for i, c := range cases {
		m := newMutant(t, c, rand.New(rand.NewPCG(*mutationSeed, uint64(i))), stray)
		for range each {
			m.execute(t)
			if t.Failed() {
				return
			}
		}
		m.judge(t)
		total += each
	}
	t.Logf("%d executions in %v", total, time.Since(began).Round(time.Second))
}

// sentFrame is one entry of a decoder's corpus.
type sentFrame struct {
	bytes []byte
	verdict
}

// mutant is the campaign of one decoder.
type mutant struct {
	*bench
	oracle *oracle
	damager
	corpus  []sentFrame
	strays  []verdict // those of other kinds that are frames of this one too
	sent    []int     // entries of the corpus in the present stream
	longest int       // bytes that may be pending
	now     fault
	wrong   bool // a value came out that is none of those sent

	counts [kindsOfFault]tally
}

// fault is how the present stream was damaged.
type fault int

const (
	flipped fault = iota // one bit of one frame
	resized              // one byte lost or added, or one frame cut short
	wrecked              // anything
	kindsOfFault
)

// tally counts executions, frames that counted in them, and executions in
// which a value came out that was not sent.
type tally struct{ runs, frames, wrong int }

func newMutant(t *testing.T, c kindCase, r *rand.Rand, stray [][]byte) *mutant {
	m := &mutant{bench: newBench(t, c), oracle: newOracle(c), damager: damager{r: r, stray: stray}}
	m.grow(t)
	for _, p := range stray {
		if v, err := m.oracle.read(p[:max(0, len(p)-m.end())]); err == nil {
			m.strays = append(m.strays, v)
		}
	}
	// Text holds a frame of the longest kind, modbus one of any byte count;
	// the others hold a few frames of their own length.
	if m.longest = 260; m.end() == 0 && c.o.Kind != frame.ModbusReply {
		m.longest = 5*len(c.frame) + 16
	}
	inner := m.emit
	m.emit = func(f *frame.Frame) {
		inner(f)
		m.compare(f)
	}
	return m
}

// end is the length of the terminator.
func (m *mutant) end() int {
	if m.c.o.Kind == frame.SCPIReply {
		return 1
	}
	return len(m.c.o.End)
}

// grow draws a corpus of intact frames around the golden one: bytes changed,
// sealed again, and kept where the oracle reads them.
func (m *mutant) grow(t *testing.T) {
	end := m.end()
	for tries := 0; len(m.corpus) < 64 && tries < 100_000; tries++ {
		p := bytes.Clone(m.c.frame[:len(m.c.frame)-end])
		at, width := m.oracle.sumPlace(len(p))
		for n := m.r.IntN(4); n > 0 && len(m.corpus) > 0; n-- {
			i := m.r.IntN(at)
			if p[i] >= '0' && p[i] <= '9' {
				p[i] = '0' + m.byte()%10
			} else {
				p[i] = m.byte()
			}
		}
		if width > 0 {
			p = append(p[:at], m.oracle.seal(p[:at])...)
		}
		v, err := m.oracle.read(p)
		whole := append(p, m.c.frame[len(m.c.frame)-end:]...)
		if err != nil || slices.ContainsFunc(m.corpus, func(s sentFrame) bool { return bytes.Equal(s.bytes, whole) }) {
			continue
		}
		m.corpus = append(m.corpus, sentFrame{whole, v})
	}
	if len(m.corpus) < 8 {
		t.Fatalf("%s: a corpus of %d frames", m.c.name, len(m.corpus))
	}
}

// compare holds a frame that counted against the oracle and what was sent.
func (m *mutant) compare(f *frame.Frame) {
	if f.Rejected != frame.None || m.which == 1 {
		return
	}
	m.counts[m.now].frames++
	v, err := m.oracle.read(f.Raw)
	switch {
	case err != nil:
		m.bad = "a frame counts that is none: " + err.Error()
	case v.none == f.HasValue, f.HasValue && (v.unit != f.Unit || !same(v.value, f.Value.Float64())):
		m.bad = fmt.Sprintf("%v %v read, %+v stands there", f.Value, f.Unit, v)
	}
	for _, i := range m.sent {
		if m.corpus[i].like(v) {
			return
		}
	}
	m.wrong = m.now != wrecked || !slices.ContainsFunc(m.strays, v.like)
}

func (v verdict) like(w verdict) bool {
	return v.none == w.none && (v.none || v.unit == w.unit && same(v.value, w.value))
}

// execute feeds one damaged stream, in pieces.
func (m *mutant) execute(t *testing.T) {
	p := m.stream()
	tally := &m.counts[m.now]
	tally.runs++
	m.bad, m.wrong, m.which = "", false, 0
	m.p, m.last, m.lists[0] = p, 0, m.lists[0][:0]
	m.d.Reset(0)
	for at := 0; at < len(p); {
		n := min(len(p)-at, 1+m.r.IntN(24))
		m.d.Feed(p[at:at+n], m.emit)
		if at += n; m.d.Pending() > m.longest {
			m.bad = fmt.Sprintf("%d bytes pending", m.d.Pending())
		}
		if m.r.IntN(8) == 0 {
			m.d.Quiet(m.emit)
		}
	}
	m.d.Quiet(m.emit)
	if m.wrong {
		tally.wrong++
	}
	if m.bad != "" {
		t.Errorf("%s: %s\nstream %x", m.c.name, m.bad, p)
		return
	}
	if m.r.IntN(4) == 0 { // split-independence, on a share
		m.holds(t, p, m.r.IntN(len(p)+1), m.r.IntN(len(p)+1))
	}
}

// stream draws one to four intact frames and damages them.
func (m *mutant) stream() []byte {
	n := 1 + m.r.IntN(4)
	m.sent = m.sent[:0]
	for range n {
		m.sent = append(m.sent, m.r.IntN(len(m.corpus)))
	}
	hurt := m.r.IntN(n)
	single := m.r.IntN(2) == 0
	m.now = wrecked
	p := m.buf[:0]
	for i, s := range m.sent {
		at := len(p)
		p = append(p, m.corpus[s].bytes...)
		if single && i == hurt {
			own, flip := m.once(p[at:])
			p = append(p[:at], own...)
			if m.now = resized; flip {
				m.now = flipped
			}
		}
	}
	if !single {
		for range 1 + m.r.IntN(4) {
			other := m.r.IntN(len(m.corpus))
			p = m.wild(p, m.corpus[other].bytes)
			m.sent = append(m.sent, other)
		}
		switch m.r.IntN(64) {
		case 0: // nothing but noise
			for i := range p {
				p[i] = m.byte()
			}
		case 1: // far more than any frame, without an end
			for len(p) > 0 && len(p) < 1024 {
				p = append(p, p...)
			}
			p = bytes.ReplaceAll(p, m.c.o.End, nil)
		}
	}
	m.buf = p[:min(len(p), 4096)]
	return m.buf
}

// judge holds the counts of one decoder against what guards it.
func (m *mutant) judge(t *testing.T) {
	c := m.counts
	t.Logf("| %s | %d | %d | %d of %d | %d of %d | %d of %d |", m.c.name, c[0].runs+c[1].runs+c[2].runs,
		c[0].frames+c[1].frames+c[2].frames, c[flipped].wrong, c[flipped].runs, c[resized].wrong, c[resized].runs, c[wrecked].wrong, c[wrecked].runs)
	chance := func(f fault, share float64) {
		expected := share * float64(c[f].runs)
		if float64(c[f].wrong) > expected+4*math.Sqrt(expected)+4 {
			t.Errorf("%s: %d of %d streams gave a value that was not sent; chance allows %.0f", m.c.name, c[f].wrong, c[f].runs, expected)
		}
	}
	_, width := m.oracle.sumPlace(64)
	crc := m.c.o.Kind == frame.ModbusReply || m.c.o.Checksum.Kind == "crc16"
	ended := len(m.c.o.End) > 0 && m.c.o.Kind != frame.SCPIReply
	if width > 0 && c[flipped].wrong > 0 {
		t.Errorf("%s: %d flipped bits gave a value that was not sent", m.c.name, c[flipped].wrong)
	}
	switch {
	case ended && c[resized].wrong > 0:
		t.Errorf("%s: %d lost or added bytes gave a value that was not sent", m.c.name, c[resized].wrong)
	case crc:
		chance(resized, 1./65536)
		chance(wrecked, 4./65536) // a stream has up to four places to be wrong at
	case width > 0:
		chance(resized, 1./256)
	}
}
