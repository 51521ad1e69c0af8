package rollup

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"
)

const start = int64(1_790_000_000) * second

// near compares floating-point numbers up to the rounding of sums.
var near = cmp.Comparer(func(a, b float64) bool { return math.Abs(a-b) <= 1e-9*(1+math.Abs(a)) })

func TestBinsHoldWhatWentIn(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := NewBook("mid")
		n := rapid.IntRange(1, 400).Draw(t, "n")
		gap := rapid.Int64Range(1, 400_000).Draw(t, "gap")
		var sum, low, high float64
		low, high = math.Inf(1), math.Inf(-1)
		at := start
		for range n {
			at += rapid.Int64Range(0, gap).Draw(t, "dt") * second / 10
			v := float64(rapid.IntRange(-5000, 20000).Draw(t, "v")) / 1000
			b.Add(0, at, v)
			sum, low, high = sum+v, min(low, v), max(high, v)
		}
		w := b.Series[0].Whole
		var count int64
		var total float64
		lowest, highest := math.Inf(1), math.Inf(-1)
		for i := range w.Bins {
			if bin := w.Bins[i]; bin.N > 0 {
				count, total = count+bin.N, total+bin.Sum
				lowest, highest = min(lowest, bin.Min), max(highest, bin.Max)
				if bin.FirstTime < bin.ID*w.Width || bin.LastTime >= (bin.ID+1)*w.Width {
					t.Fatalf("bin %d of width %d holds %d..%d", bin.ID, w.Width, bin.FirstTime, bin.LastTime)
				}
			}
		}
		if count != int64(n) || lowest != low || highest != high || math.Abs(total-sum) > 1e-9*(1+math.Abs(sum)) {
			t.Fatalf("%d readings of sum %g in %g..%g, want %d, %g, %g..%g", count, total, lowest, highest, n, sum, low, high)
		}
		if len(w.Bins) > mostWhole {
			t.Fatalf("%d bins", len(w.Bins))
		}
		if b.Until != at {
			t.Fatalf("until %d, want %d", b.Until, at)
		}
	})
}

// Half of the readings in one book, half in another, added in disorder, give
// the bins that one book has.
func TestMergeGivesTheSameAsOneBook(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	one, first, second_ := NewBook("mid", "air"), NewBook("mid", "air"), NewBook("mid", "air")
	for _, b := range []*Book{one, first, second_} {
		b.SetOrigin(start + 5000*second)
	}
	type reading struct {
		i int
		t int64
		v float64
	}
	var rest []reading
	for k := range int64(40_000) {
		d := reading{int(k % 2), start + k*7*second/3, r.NormFloat64()}
		one.Add(d.i, d.t, d.v)
		if k < 25_000 {
			first.Add(d.i, d.t, d.v)
		} else {
			rest = append(rest, d)
		}
	}
	// Out of order within the last twenty minutes only, as ports deliver.
	for lo := 0; lo < len(rest); lo += 50 {
		part := rest[lo:min(lo+50, len(rest))]
		r.Shuffle(len(part), func(i, j int) { part[i], part[j] = part[j], part[i] })
	}
	for _, d := range rest {
		second_.Add(d.i, d.t, d.v)
	}
	if err := first.Merge(second_); err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(one, first, near); d != "" {
		t.Error(d)
	}
	if err := first.Merge(NewBook("other")); err == nil {
		t.Error("a book of other channels was merged")
	}
}

func TestSinceIsWholeOnlyWhileMemoryHoldsIt(t *testing.T) {
	b := NewBook("mid")
	for k := range int64(5000) {
		b.Add(0, start+k*second, float64(k))
	}
	if !b.SetOrigin(start + 4500*second) {
		t.Error("an origin eight minutes ago is said to be lost")
	}
	if got := b.Series[0].Since[sinceIndex(100*second)]; got.N == 0 || math.Abs(got.Mean()-4600) > 10 {
		t.Errorf("100 s after the origin the bin is %+v", got)
	}
	if b.SetOrigin(start + 100*second) {
		t.Error("an origin that left memory is said to be whole")
	}
	late := NewBook("mid")
	late.SetOrigin(start + 100*second)
	for k := range int64(5000) {
		late.Add(0, start+k*second, float64(k))
	}
	b.ReplaceSince(late)
	if d := cmp.Diff(late.Series[0].Since, b.Series[0].Since, near); d != "" {
		t.Error(d)
	}
}

func TestNearFindsYesterday(t *testing.T) {
	b := NewBook("mid")
	for k := range int64(3 * 1440) {
		b.Add(0, start+k*60*second, float64(k))
	}
	now := start + (3*1440-1)*60*second
	for _, c := range []struct{ back, within float64 }{{0, 1}, {10, 2}, {1440, 6}, {2880, 6}} {
		got, _, ok := b.Series[0].Near(now - int64(c.back*60)*second)
		if want := float64(3*1440-1) - c.back; !ok || math.Abs(got-want) > c.within {
			t.Errorf("%g min ago: %g %v, want %g", c.back, got, ok, want)
		}
	}
	if _, _, ok := b.Series[0].Near(start - 3600*second); ok {
		t.Error("there is something before the run")
	}
}

func TestAddingAllocatesNothing(t *testing.T) {
	b := NewBook("mid")
	b.SetOrigin(start)
	for k := range int64(100_000) {
		b.Add(0, start+k*second/10, 1)
	}
	at := b.Until
	if n := testing.AllocsPerRun(1000, func() { at += second / 10; b.Add(0, at, 2) }); n > 0.1 {
		t.Errorf("%g allocations a reading", n)
	}
}

func BenchmarkAdd(b *testing.B) {
	book := NewBook("mid")
	book.SetOrigin(start)
	at := start
	for b.Loop() {
		at += second / 10
		book.Add(0, at, 1)
	}
}
