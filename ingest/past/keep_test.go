package past

import (
	"errors"
	"math/rand/v2"
	"path"
	"testing"

	"gaugelog/config"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// Whatever is wrong with a summary, the bins are those of the readings: missing,
// torn at any length, one bit wrong, of another segment, or of other channels.
func TestSummariesThatAreWrong(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 4, 120, 30*second)
	last := all[len(all)-1].t
	want := everything(all, last+1, start+second)
	bookOf(t, pastOf(disk), last+1, start+second)
	whole := map[string][]byte{}
	for _, name := range summaries(disk) {
		whole[name] = disk.Bytes(name)
	}
	check := func(what string) {
		t.Helper()
		p := pastOf(disk)
		p.Keep = false // what is wrong stays there
		same(t, what, bookOf(t, p, last+1, start+second), want, true)
	}
	name := path.Join(Dir, "000002.gob.zst")
	if whole[name] == nil {
		t.Fatalf("no summary of segment 2 among %v", summaries(disk))
	}
	for n := range len(whole[name]) {
		if n%41 == 0 {
			disk.Put(name, whole[name][:n])
			check("torn")
		}
	}
	rng := rand.New(rand.NewPCG(3, 4))
	for range 100 {
		damaged := append([]byte(nil), whole[name]...)
		damaged[rng.IntN(len(damaged))] ^= 1 << rng.IntN(8)
		disk.Put(name, damaged)
		check("one bit wrong")
	}
	disk.Put(name, whole[path.Join(Dir, "000001.gob.zst")])
	check("of another segment")
	disk.Put(name, nil)
	check("empty")
	if err := disk.Remove(name); err != nil {
		t.Fatal(err)
	}
	check("missing")
	other := pastOf(disk)
	other.Channels = ChannelsOf(&config.Rig{Gauges: []config.Gauge{{Name: "mid"}}})
	b, err := other.Book(t.Context(), last+1, 0)
	if err != nil || len(b.Series) != 1 {
		t.Fatal(err)
	}
	check("of other channels")
	// What was wrong is made anew where it may be.
	bookOf(t, pastOf(disk), last+1, 0)
	if string(disk.Bytes(name)) == "" || len(summaries(disk)) != 3 {
		t.Errorf("the summaries are %v", summaries(disk))
	}
}

// A segment that is not what it was gets a new summary: other bytes under the
// same name and of the same length.
func TestSummariesThatAreStale(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 3, 120, 30*second)
	last := all[len(all)-1].t
	bookOf(t, pastOf(disk), last+1, 0)
	other, others := lay(t, 3, 120, 31*second) // as many readings, other instants
	for _, name := range other.Names() {
		disk.Put(name, other.Bytes(name))
	}
	last = others[len(others)-1].t
	same(t, "replaced segments", bookOf(t, pastOf(disk), last+1, 0), everything(others, last+1, 0), true)
}

// A power cut or a kill at every call of a first start, and a fault of each call:
// the next start has the bins of the readings, and the readings are untouched.
func TestAStartThatIsCutOff(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 4, 60, 30*second)
	last := all[len(all)-1].t
	want := everything(all, last+1, start+second)
	raw := map[string]string{}
	for _, name := range disk.Names() {
		raw[name] = string(disk.Bytes(name))
	}
	kinds := []string{"create", "rename", "remove", "mkdir", "syncdir", "write", "sync", "close"}
	rng := rand.New(rand.NewPCG(5, 6))
	cuts := 0
	for at := 1; ; at++ {
		trial := disk.Crash(rng, true)
		trial.Inject(&segmenttest.Failure{At: at, Persistent: true, Only: kinds, Err: errors.New("cut off")})
		if _, err := pastOf(trial).Book(t.Context(), last+1, start+second); err != nil {
			t.Fatalf("a summary that cannot be stored fails the start: %v", err)
		}
		calls := trial.Calls()
		trial.Inject(nil)
		for _, killed := range []bool{true, false} {
			again := trial.Crash(rng, killed)
			same(t, "after a cut", bookOf(t, pastOf(again), last+1, start+second), want, true)
			same(t, "with what that stored", bookOf(t, pastOf(again), last+1, start+second), want, true)
			for name, text := range raw {
				if string(again.Bytes(name)) != text {
					t.Fatalf("%s was changed", name)
				}
			}
			cuts++
		}
		if calls < at { // nothing failed any more
			t.Logf("%d cuts at %d calls", cuts, at-1)
			if at < 15 {
				t.Errorf("%d calls only", at-1)
			}
			return
		}
	}
}

// Segments of a boot whose clock was set later are put right, although they were
// summarised before.
func TestAClockThatIsSetLater(t *testing.T) {
	t.Parallel()
	fs := segmenttest.New()
	at := start
	all := laySegment(t, fs, 1, 100, &at, 30*second, false)
	seal(t, fs, 1)
	same(t, "not set yet", bookOf(t, pastOf(fs), at, 0), everything(all, at, 0), true)
	if len(summaries(fs)) != 1 {
		t.Fatalf("the summaries are %v", summaries(fs))
	}
	// An hour is added to the clock, and it is set from then on.
	before := len(all)
	late := at + 3600*second
	w, err := segment.NewWriter(fs, segment.ReadingsDir, 2, segment.WriterOptions{
		Header: segment.Header{Run: "run", Boot: "boot", Clock: segment.ClockState{Wall: late, Boot: at - start + second, Synced: true}}, Stamps: new(segment.Stamps)})
	if err != nil {
		t.Fatal(err)
	}
	for i := range int64(50) {
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: 1, Time: late + i*second}); err != nil {
			t.Fatal(err)
		}
		all = append(all, reading{0, late + i*second, 1})
	}
	if err := w.Close(segment.ClockState{Wall: late + 50*second, Boot: at - start + 51*second, Synced: true}); err != nil {
		t.Fatal(err)
	}
	for i := range before {
		all[i].t += 3600 * second
	}
	end := late + 60*second
	same(t, "set later", bookOf(t, pastOf(fs), end, 0), everything(all, end, 0), true)
	same(t, "set later, again", bookOf(t, pastOf(fs), end, 0), everything(all, end, 0), true)
}

// Segments that are closed while the run goes on get their summaries; an
// onlooker writes none.
func TestSegmentsClosedMeanwhile(t *testing.T) {
	t.Parallel()
	disk, all := lay(t, 3, 120, 30*second)
	last := all[len(all)-1].t
	looking := pastOf(disk)
	looking.Keep = false
	bookOf(t, looking, last+1, 0)
	if err := looking.Summarise(t.Context()); err != nil || len(summaries(disk)) != 0 {
		t.Fatalf("an onlooker left %v, %v", summaries(disk), err)
	}
	p := pastOf(disk)
	if err := p.Summarise(t.Context()); err != nil || len(summaries(disk)) != 0 {
		t.Errorf("before the first book there are %v, %v", summaries(disk), err)
	}
	bookOf(t, p, last+1, 0)
	seal(t, disk, 3)
	at := last + 30*second
	all = append(all, laySegment(t, disk, 4, 120, &at, 30*second, true)...)
	for range 2 {
		if err := p.Summarise(t.Context()); err != nil || len(summaries(disk)) != 3 {
			t.Errorf("behind it there are %v, %v", summaries(disk), err)
		}
	}
	same(t, "with them", bookOf(t, pastOf(disk), at, 0), everything(all, at, 0), true)
}

// A folder made elsewhere has no checksums: nothing in it counts as closed.
func TestAFolderMadeElsewhere(t *testing.T) {
	t.Parallel()
	fs := segmenttest.New()
	fs.Put("readings/x.lp", []byte("indication,gauge=mid mm=1.5 1790000000000000000\nambient,probe=air celsius=20.5,humidity_percent=48.2 1790000001000000000\n"))
	b := bookOf(t, pastOf(fs), start+10*second, 0)
	if n := len(b.Series[0].Whole.Bins); n != 1 || b.Series[2].Whole.Bins[0].Sum != 20.5 || b.Series[3].Whole.Bins[0].Sum != 48.2 || len(summaries(fs)) != 0 {
		t.Errorf("the bins are %+v, the summaries %v", b.Series[2].Whole, summaries(fs))
	}
	if _, err := pastOf(segmenttest.New()).Book(t.Context(), start, 0); err != nil {
		t.Errorf("an empty folder: %v", err)
	}
}
