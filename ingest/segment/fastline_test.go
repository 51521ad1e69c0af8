package segment

import (
	"bytes"
	"math/rand/v2"
	"regexp"
	"strconv"
	"testing"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"
)

// exactForm is what the fast path may take (design of the format), written in
// another way than the code.
var exactForm = regexp.MustCompile(`^indication,gauge=[A-Za-z0-9_.-]{1,64} mm=-?[0-9]{1,9}(\.[0-9]{1,6})? [1-9][0-9]{18}\n$`)

// agree checks a text by itself: see agreeWith.
func agree(t *testing.T, text []byte) {
	t.Helper()
	agreeWith(t, text, newInterner(nil))
}

// agreeWith checks the lines of a text: those that the fast path takes have
// exactly the form and the library's decoder reads the same; where it stops at
// a line that has the form, its stamp does not fit. It returns how many it took.
func agreeWith(t *testing.T, text []byte, names *interner) int {
	t.Helper()
	var cols columns
	taken := fastLines(text, &cols, names)
	if rest := text[taken:]; len(rest) > 0 {
		if n := bytes.IndexByte(rest, '\n') + 1; n > 0 && exactForm.Match(rest[:n]) {
			if rec, ok, err := slowLine(rest[:n]); ok && err == nil && rec.Kind == Indication {
				t.Fatalf("the fast path refuses %q", rest[:n])
			}
		}
	}
	line := text[:taken]
	for i := range cols.gauge {
		n := bytes.IndexByte(line, '\n') + 1
		agreeOn(t, line[:n], names.names[cols.gauge[i]], cols.micro[i], cols.time[i])
		line = line[n:]
	}
	if len(line) > 0 {
		t.Fatalf("%q taken without a row", line)
	}
	return len(cols.gauge)
}

// agreeOn holds one line that the fast path took against the library and the
// slow path.
func agreeOn(t *testing.T, one []byte, name string, micro, stamp int64) {
	t.Helper()
	if !exactForm.Match(one) {
		t.Fatalf("the fast path takes %q", one)
	}
	d := lineprotocol.NewDecoderWithBytes(one)
	d.Next()
	m, err := d.Measurement()
	key, value, err2 := d.NextTag()
	if err != nil || err2 != nil || string(m) != "indication" || string(key) != "gauge" || string(value) != name {
		t.Fatalf("%q: gauge %q, the library says %q", one, name, value)
	}
	f, v, err := d.NextField()
	if err != nil || string(f) != "mm" || v.FloatV() != float64(micro)/1e6 {
		t.Fatalf("%q: %d millionths, the library says %v", one, micro, v)
	}
	raw, err := d.TimeBytes()
	if err != nil || strconv.FormatInt(stamp, 10) != string(raw) {
		t.Fatalf("%q: time %d, the library says %s", one, stamp, raw)
	}
	rec, ok, err := slowLine(one)
	if err != nil || !ok || rec.Point != nil || rec.MM != float64(micro)/1e6 || rec.Time != stamp || rec.Name != name {
		t.Fatalf("%q: the slow path gives %+v %v", one, rec, err)
	}
}

var seeds = []string{
	"indication,gauge=mid mm=1.234 1790000000000000000\n",
	"indication,gauge=mid mm=-0 1790000000000000000\n",
	"indication,gauge=g mm=-0.000001 9223372036854775807\n",
	"indication,gauge=g mm=1 9223372036854775808\n",
	"indication,gauge=a-rather_long.name mm=123456789.123456 1790000000000000000\n",
	"indication,gauge=mid mm=1234567890 1790000000000000000\n",
	"indication,gauge=mid mm=1.2345678 1790000000000000000\n",
	"indication,gauge=mid mm=0x1p3 1790000000000000000\n",
	"indication,gauge=mid mm=1_0.5 1790000000000000000\n",
	"indication,gauge=mid mm=.5 1790000000000000000\n",
	"indication,gauge=mid mm=5. 1790000000000000000\n",
	"indication,gauge=mid mm=1e3 1790000000000000000\n",
	"indication,gauge=mid mm=01.5 1790000000000000000\n",
	"indication,gauge=mid mm=1i 1790000000000000000\n",
	"indication,gauge=mid mm=1.5 179000000000000000\n",
	"indication,gauge=mid mm=1.5 \x00\x00\x00\x00\x00\x00\x00\x0000000000000\n",
	"indication,gauge=mid mm=1.5 \x01\x00\x00\x00\x00\x00\x00\x0000000000000\n",
	"indication,gauge=mid mm=1.5\n",
	"indication,gauge=mid  mm=1.5 1790000000000000000\n",
	"indication,gauge=mid mm=1.5,mm=2 1790000000000000000\n",
	"indication,gauge=mi\\ d mm=1.5 1790000000000000000\n",
	"indication,gauge=mid mm=1.5 1790000000000000000\r\n",
	"indication,gauge=mid,x=y mm=1.5 1790000000000000000\n",
	"indication,gauge=12345678 mm=1.5 1790000000000000000\nindication,gauge=123456789 mm=1.5 1790000000000000000\n",
}

func FuzzFastPathAgreesWithTheLibrary(f *testing.F) {
	for _, s := range seeds {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, line []byte) { agree(t, line) })
}

// Every change of one byte of lines of the form is judged alike by both paths.
func TestFastPathAgreesOnAllNeighbours(t *testing.T) {
	for _, s := range seeds {
		for i := range s {
			for _, c := range []byte("0159 .,-+=\"\\_/:aexzEZ#\n\r\t\x00\x7f\x80\xb0\xff") {
				b := []byte(s)
				b[i] = c
				agree(t, b)
			}
			agree(t, []byte(s[:i]+s[i+1:]))
			agree(t, []byte(s[:i]+"0"+s[i:]))
		}
		agree(t, []byte(s[:len(s)-1]))
	}
}

// A careful reader refuses what the library's decoder lets pass.
func TestOdditiesAreRefused(t *testing.T) {
	for _, s := range []string{
		"indication,gauge=mid mm=0x1p3 1790000000000000000\n",
		"indication,gauge=mid mm=1_0.5 1790000000000000000\n",
		"indication,gauge=mid mm=1.5,mm=2 1790000000000000000\n",
		"indication,gauge=mid,gauge=mid mm=1.5 1790000000000000000\n",
		"indication,gauge=mid mm=1.5\n",
		"indication mm=1.5 1790000000000000000\n",
		"indication,gauge=mid mm=\"1.5\" 1790000000000000000\n",
		"indication,gauge=mid mm=1.5 1790000000000000000 x\n",
		"note text=\"a",
	} {
		if rec, ok, err := slowLine([]byte(s)); err == nil {
			t.Errorf("%q is taken: %+v %v", s, rec, ok)
		}
	}
}

// mixed makes lines of n readings of eight gauges as the writer writes them.
func mixed(n int) []byte {
	rng := rand.New(rand.NewPCG(5, 6))
	enc := lineEncoder{stamps: new(Stamps)}
	var b []byte
	gauges := []string{"left", "q1", "mid", "q3", "right", "ref", "seat-l", "seat-r"}
	for i := range n {
		in := Shown{Gauge: gauges[i%8], MM: float64(rng.IntN(12700)) / 1000, Time: t0 + int64(i)*1e7}
		b, _, _ = enc.indication(b, &in)
	}
	return b
}

// shortest is the least time that a pass took: on a machine with other work it
// tells more than the mean, since a pass is much shorter than a turn of the
// processor.
type shortest struct{ d time.Duration }

func (s *shortest) see(d time.Duration) {
	if s.d == 0 || d < s.d {
		s.d = d
	}
}

func (s *shortest) each(n int) float64 { return float64(s.d.Nanoseconds()) / float64(n) }

// creeping makes lines of n readings whose values change as a beam's do.
func creeping(n int) []byte {
	rng := rand.New(rand.NewPCG(1, 2))
	enc := lineEncoder{stamps: new(Stamps)}
	var b []byte
	gauges := []string{"left", "q1", "mid", "q3", "right", "ref", "seat-l", "seat-r"}
	for i := range n {
		mm := float64(1234+300*(i%8)+rng.IntN(3)+rng.IntN(3)) / 1000
		b, _, _ = enc.indication(b, &Shown{Gauge: gauges[i%8], MM: mm, Time: t0 + int64(i)*1e7 + rng.Int64N(3e6)})
	}
	return b
}

func BenchmarkDecodeFastPath(b *testing.B) {
	b.Run("random", func(b *testing.B) { benchmarkFast(b, mixed(20000)) })
	b.Run("creeping", func(b *testing.B) { benchmarkFast(b, creeping(20000)) })
}

func benchmarkFast(b *testing.B, text []byte) {
	names := newInterner(nil)
	var cols columns
	b.SetBytes(int64(len(text)))
	var best shortest
	for b.Loop() {
		begun := time.Now()
		cols = columns{cols.gauge[:0], cols.micro[:0], cols.time[:0]}
		if fastLines(text, &cols, names) != len(text) {
			b.Fatal("not all taken")
		}
		best.see(time.Since(begun))
	}
	b.ReportMetric(best.each(20000), "best-ns/reading")
	b.ReportMetric(20000*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mreadings/s")
}

func BenchmarkDecodeLibrary(b *testing.B) {
	text := mixed(20000)
	b.SetBytes(int64(len(text)))
	sum := 0.0
	var best shortest
	for b.Loop() {
		begun := time.Now()
		d := lineprotocol.NewDecoderWithBytes(text)
		for d.Next() {
			if _, err := d.Measurement(); err != nil {
				b.Fatal(err)
			}
			for {
				key, _, err := d.NextTag()
				if err != nil {
					b.Fatal(err)
				}
				if key == nil {
					break
				}
			}
			for {
				key, v, err := d.NextField()
				if err != nil {
					b.Fatal(err)
				}
				if key == nil {
					break
				}
				sum += v.FloatV()
			}
			if _, err := d.TimeBytes(); err != nil {
				b.Fatal(err)
			}
		}
		best.see(time.Since(begun))
	}
	b.ReportMetric(best.each(20000), "best-ns/reading")
	b.ReportMetric(20000*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mreadings/s")
}

// Appending indications allocates nothing once the buffers have grown.
func TestAppendingAllocatesNothing(t *testing.T) {
	fs, _ := testFS(t)
	w, err := NewWriter(fs, ReadingsDir, 1, WriterOptions{Header: testHeader()})
	if err != nil {
		t.Fatal(err)
	}
	now := t0
	in := Shown{Gauge: "mid", MM: 1.234, Shown: 0.0486, Unit: "in"}
	round := func() {
		for range 200 {
			now += 1e6
			in.Time = now
			if err := w.Indication(&in); err != nil {
				t.Fatal(err)
			}
			if err := w.Ambient("air", 20.1, 48.5, now); err != nil {
				t.Fatal(err)
			}
		}
	}
	for range 4 {
		round()
	}
	w.Checkpoint(synced(now))
	if n := testing.AllocsPerRun(1, round); n != 0 {
		t.Errorf("%v allocations for 400 lines", n)
	}
	if err := w.Checkpoint(synced(now)); err != nil {
		t.Fatal(err)
	}
	if n := testing.AllocsPerRun(5, func() {
		if err := w.Checkpoint(synced(now)); err != nil {
			t.Fatal(err)
		}
	}); n != 0 {
		t.Logf("%v allocations a checkpoint", n)
	}
	w.Close(synced(now))
}
