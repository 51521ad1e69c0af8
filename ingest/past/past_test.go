package past

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"gaugelog/config"
	"gaugelog/ingest/rollup"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

const (
	second = int64(1e9)
	start  = int64(1_790_000_000) * second
)

var rig = &config.Rig{
	Gauges: []config.Gauge{{Name: "mid"}, {Name: "east"}},
	Probes: []config.Probe{{Name: "air"}},
}

// reading is one reading of a channel.
type reading struct {
	channel int
	t       int64
	v       float64
}

// lay writes a run of several segments on a file system in memory, the last one
// open and the others closed, and returns its readings: every `every` for so
// many segments of so many instants.
func lay(t testing.TB, segments, instants int, every int64) (*segmenttest.FS, []reading) {
	t.Helper()
	fs := segmenttest.New()
	var all []reading
	at := start
	for number := 1; number <= segments; number++ {
		all = append(all, laySegment(t, fs, number, instants, &at, every, true)...)
		if number < segments {
			seal(t, fs, number)
		}
	}
	return fs, all
}

func laySegment(t testing.TB, fs segment.FS, number, instants int, at *int64, every int64, set bool) (all []reading) {
	t.Helper()
	clock := func() segment.ClockState {
		return segment.ClockState{Wall: *at, Boot: *at - start + second, Synced: set}
	}
	w, err := segment.NewWriter(fs, segment.ReadingsDir, number, segment.WriterOptions{
		Header: segment.Header{Run: "run", Boot: "boot", Clock: clock()}, Stamps: new(segment.Stamps)})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(uint64(number), 7))
	for range instants {
		for g, name := range []string{"mid", "east"} {
			mm := math.Round(1000*(2*float64(g)+rng.NormFloat64())) / 1000
			if err := w.Indication(&segment.Shown{Gauge: name, MM: mm, Time: *at}); err != nil {
				t.Fatal(err)
			}
			all = append(all, reading{g, *at, mm})
		}
		if rng.IntN(10) == 0 {
			if err := w.Checkpoint(clock()); err != nil {
				t.Fatal(err)
			}
		}
		*at += every
	}
	if err := w.Close(clock()); err != nil {
		t.Fatal(err)
	}
	return all
}

// seal does what a recorder does with a closed segment.
func seal(t testing.TB, fs segment.FS, number int) {
	t.Helper()
	packed, err := segment.Compress(fs, number)
	if err == nil {
		err = segment.UpdateSums(fs, packed.Name)
	}
	if err != nil {
		t.Fatal(err)
	}
}

// everything is the book that has taken each reading by itself.
func everything(all []reading, before, origin int64) *rollup.Book {
	b := rollup.NewBook(ChannelsOf(rig).Names()...)
	b.SetOrigin(origin)
	for _, r := range all {
		if r.t < before {
			b.Add(r.channel, r.t, r.v)
		}
	}
	return b
}

func pastOf(fs segment.FS) *Past { return &Past{FS: fs, Channels: ChannelsOf(rig), Keep: true} }

var near = cmp.Comparer(func(a, b float64) bool { return math.Abs(a-b) <= 1e-9*(1+math.Abs(a)) })

// same compares the bins of two books; those since the origin only where asked.
func same(t testing.TB, what string, got, want *rollup.Book, since bool) {
	t.Helper()
	g, w := *got, *want
	g.Series, w.Series = seriesOf(got, since), seriesOf(want, since)
	if slices.EqualFunc(g.Series, w.Series, sameSeries) && g.Origin == w.Origin && g.Until == w.Until {
		return // quicker than to look for what differs
	}
	if d := cmp.Diff(&w, &g, near); d != "" {
		t.Errorf("%s: the bins differ: %s", what, d[:min(len(d), 800)])
	}
}

func sameSeries(a, b rollup.Series) bool {
	return a.Name == b.Name && a.Whole.Width == b.Whole.Width && a.Whole.From == b.Whole.From && len(a.Since) == len(b.Since) &&
		slices.EqualFunc(a.Recent.Bins, b.Recent.Bins, sameBin) && slices.EqualFunc(a.Days.Bins, b.Days.Bins, sameBin) &&
		slices.EqualFunc(a.Whole.Bins, b.Whole.Bins, sameBin) && slices.EqualFunc(a.Since, b.Since, sameBin)
}

func sameBin(a, b rollup.Bin) bool {
	off := math.Abs(a.Sum - b.Sum)
	a.Sum = b.Sum
	return a == b && off <= 1e-9*(1+math.Abs(b.Sum))
}

// seriesOf leaves out what lies more than twenty minutes back among the recent
// bins: where readings come seldom some of it stays until it is written over.
func seriesOf(b *rollup.Book, since bool) []rollup.Series {
	out := slices.Clone(b.Series)
	for i := range out {
		out[i].Recent.Bins = slices.Clone(out[i].Recent.Bins)
		for k, bin := range out[i].Recent.Bins {
			if bin.LastTime < b.Until-rollup.RecentFor+second {
				out[i].Recent.Bins[k] = rollup.Bin{}
			}
		}
		if !since {
			out[i].Since = nil
		}
	}
	return out
}

func bookOf(t testing.TB, p *Past, before, origin int64) *rollup.Book {
	t.Helper()
	b, err := p.Book(t.Context(), before, origin)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// counting counts the bytes read of closed segments.
type counting struct {
	segment.FS
	read int64
}

func (c *counting) Open(name string) (segment.File, error) {
	f, err := c.FS.Open(name)
	if err == nil && strings.HasSuffix(name, ".lp.zst") {
		f = countingFile{f, c}
	}
	return f, err
}

type countingFile struct {
	segment.File
	c *counting
}

func (f countingFile) ReadAt(p []byte, off int64) (int, error) {
	n, err := f.File.ReadAt(p, off)
	f.c.read += int64(n)
	return n, err
}

// With summaries the bins are those of all readings, and the closed segments are
// not read again but for the first hours since the origin and the last minutes.
func TestSummariesGiveTheBinsOfTheReadings(t *testing.T) {
	t.Parallel()
	for _, every := range []int64{second / 4, 7 * second, 241 * second} {
		disk, all := lay(t, 8, 900, every)
		fs := &counting{FS: disk}
		last := all[len(all)-1].t
		for _, c := range []struct {
			name           string
			before, origin int64
		}{
			{"no origin", last + 1, 0}, {"an early origin", last + 1, start + 50*every}, {"a late origin", last + 1, last - 20*every},
			{"an end within", last - 1500*every, start + 50*every}, {"nothing yet", start, start},
		} {
			what := fmt.Sprintf("every %d s, %s", every/second, c.name)
			// From the origin on for fourteen hours at least bins are exact.
			exact := last-c.origin < sinceFor
			same(t, what+", new", bookOf(t, pastOf(fs), c.before, c.origin), everything(all, c.before, c.origin), exact)
			same(t, what+", again", bookOf(t, pastOf(fs), c.before, c.origin), everything(all, c.before, c.origin), exact)
		}
		if n := len(summaries(disk)); n != 7 {
			t.Errorf("%d summaries, want 7: %v", n, summaries(disk))
		}
	}
}

func summaries(fs *segmenttest.FS) (names []string) {
	for _, n := range fs.Names() {
		if strings.HasPrefix(n, Dir) {
			names = append(names, n)
		}
	}
	return names
}

// A start with summaries reads the open segment and the last minutes, not the run.
func TestAStartReadsNoClosedSegments(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 5, 12000, 20*second)
	fs := &counting{FS: disk}
	last := all[len(all)-1].t
	bookOf(t, pastOf(fs), last+1, 0)
	anew := fs.read
	fs.read = 0
	bookOf(t, pastOf(fs), last+1, 0)
	t.Logf("%d bytes read without summaries, %d with them", anew, fs.read)
	if fs.read*5 > anew { // their indexes alone
		t.Errorf("%d bytes of closed segments are read with summaries, %d without", fs.read, anew)
	}
}

// Long after the origin the bins since then are made of bins of ten minutes:
// each reading still counts once, and what they say is true where they stand.
func TestBinsLongSinceTheOrigin(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 8, 900, 300*second) // 25 d
	last := all[len(all)-1].t
	origin := start + 3601*second
	want := everything(all, last+1, origin)
	for range 2 {
		got := bookOf(t, pastOf(disk), last+1, origin)
		for i := range got.Series {
			var n, wanted int64
			for k, b := range got.Series[i].Since {
				w := want.Series[i].Since[k]
				n, wanted = n+b.N, wanted+w.N
				if b.N > 0 && (float64((b.FirstTime-w.FirstTime)/second) > 600 || float64((w.LastTime-b.LastTime)/second) > 600) {
					t.Errorf("bin %d reaches from %d to %d, want %d to %d", k, b.FirstTime, b.LastTime, w.FirstTime, w.LastTime)
				}
				if d := b.N - w.N; d > 4 || d < -4 {
					t.Errorf("bin %d holds %d readings, want %d", k, b.N, w.N)
				}
			}
			if n != wanted {
				t.Errorf("channel %d: %d readings since the origin, want %d", i, n, wanted)
			}
		}
	}
}
