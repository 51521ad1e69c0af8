package history

import (
	"cmp"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	gocmp "github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

func notes(h *History, code string) int {
	n := 0
	for _, v := range h.Notes {
		if v.Code == code {
			n++
		}
	}
	return n
}

// Whatever the disorder of a foreign file, bins and fine bins are those of the
// readings in order, and the note says that they were not.
func TestDisorderGivesTheSameBins(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(50, 3000).Draw(t, "readings")
		reach := rapid.SampledFrom([]int{1, 30, 1000, 1 << 20}).Draw(t, "displacement in readings")
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		list := make([]Sample, n)
		at := make([]int, n)
		for i := range list {
			list[i] = Sample{t0 + int64(i)*20*second + rng.Int64N(10*second), float64(rng.IntN(2000)) / 1000}
			at[i] = i + rng.IntN(reach)
		}
		order := make([]int, n)
		for i := range order {
			order[i] = i
		}
		slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(at[a], at[b]) })
		fs := segmenttest.New()
		if err := fs.MkdirAll(segment.ReadingsDir); err != nil {
			t.Fatal(err)
		}
		fs.Put(segment.RigFile, []byte(rigText))
		files := rapid.IntRange(1, 9).Draw(t, "files")
		for k := range files {
			var text strings.Builder
			for _, i := range order[k*n/files : (k+1)*n/files] {
				fmt.Fprintf(&text, "indication,gauge=mid mm=%.3f %d\n", list[i].MM, list[i].Time)
			}
			fs.Put(fmt.Sprintf("%s/hand%d.lp", segment.ReadingsDir, k), []byte(text.String()))
		}
		h, err := Open(fs)
		if err != nil {
			t.Fatal(err)
		}
		same(t, h, [][]Sample{list, nil})
		if disorder := !slices.IsSorted(order); disorder != (notes(h, "out-of-order") > 0) {
			t.Fatalf("disorder %v, notes %v", disorder, h.Notes)
		}
	})
}

// A unit key was pressed for an hour: those lines carry what the gauge showed
// and stand among the plain ones. They are in order, and no multiples of the
// resolution are expected of them.
func TestUnitKeyIsNoDisorder(t *testing.T) {
	fs := segmenttest.New()
	if err := fs.MkdirAll(segment.ReadingsDir); err != nil {
		t.Fatal(err)
	}
	fs.Put(segment.RigFile, []byte(rigText))
	var text strings.Builder
	var list []Sample
	for i := range int64(3000) {
		at, mm, more := t0+i*10*second, 3.21, ""
		if i >= 1000 && i < 1360 {
			mm, more = 3.2131, ",shown=0.1265,unit=\"in\""
		}
		list = append(list, Sample{at, mm})
		fmt.Fprintf(&text, "indication,gauge=mid mm=%v%s %d\n", mm, more, at)
	}
	fs.Put(segment.ReadingsDir+"/hand.lp", []byte(text.String()))
	h, err := Open(fs)
	if err != nil {
		t.Fatal(err)
	}
	same(t, h, [][]Sample{list, nil})
	if n := notes(h, "out-of-order") + notes(h, "not-a-multiple"); n > 0 {
		t.Errorf("%v", h.Notes)
	}
}

// same holds what h says of its readings against what they are.
func same(t interface{ Fatalf(string, ...any) }, h *History, want [][]Sample) {
	m, err := FromSamples(Given{Rig: h.Rig, Samples: want})
	if err != nil {
		t.Fatalf("%v", err)
	}
	if h.Readings != m.Readings || h.First != m.First || h.Last != m.Last {
		t.Fatalf("readings, first, last %d %d %d, want %d %d %d", h.Readings, h.First, h.Last, m.Readings, m.First, m.Last)
	}
	edges := []int64{m.First, m.First + 1, m.First + 777*second, (m.First+m.Last)/2 + 1000*second, m.Last + 2000*second}
	fine, err := h.Fine(edges)
	if err != nil {
		t.Fatalf("%v", err)
	}
	wantFine, _ := m.Fine(edges)
	window, err := h.Window(m.First+100*second, m.Last-100*second)
	if err != nil {
		t.Fatalf("%v", err)
	}
	wantWindow, _ := m.Window(m.First+100*second, m.Last-100*second)
	for g := range want {
		if d := gocmp.Diff(m.Bins(g), h.Bins(g)); d != "" {
			t.Fatalf("bins of gauge %d: %s", g, d)
		}
		if d := gocmp.Diff(wantFine[g], fine[g]); d != "" {
			t.Fatalf("fine bins of gauge %d: %s", g, d)
		}
		if !slices.Equal(wantWindow[g], window[g]) {
			t.Fatalf("window of gauge %d: %d readings, want %d", g, len(window[g]), len(wantWindow[g]))
		}
	}
}

// A window of more readings than are held is thinned to real readings spread
// evenly over it, whatever their order.
func TestWindowIsBounded(t *testing.T) {
	const n = 5 * WindowMost
	var list []Sample
	for i := range n {
		list = append(list, Sample{t0 + int64(i)*second/100, float64(i*7%1000) / 1000})
	}
	from, to := list[0].Time, list[n-1].Time
	forward, back := newThinner(from, to), newThinner(from, to)
	for i := range list {
		forward.add(list[i])
		back.add(list[n-1-i])
	}
	got := forward.samples()
	if !slices.Equal(got, back.samples()) {
		t.Error("the order of the readings makes a difference")
	}
	if len(got) < WindowMost-1 || len(got) > WindowMost {
		t.Errorf("%d readings of %d", len(got), n)
	}
	for i, s := range got {
		k := int((s.Time - t0) / (second / 100))
		if list[k] != s || i > 0 && s.Time-got[i-1].Time > 2*(to-from)/WindowMost {
			t.Fatalf("%v is no reading, or far from the one before", s)
		}
	}
	m := &memory{samples: [][]Sample{list}}
	if w, _ := m.Window(from, to); !slices.Equal(w[0], got) {
		t.Error("readings in memory are thinned otherwise")
	}
	few := newThinner(from, to)
	for _, s := range list[:2*WindowMost] {
		few.add(s)
	}
	if !slices.Equal(few.samples(), list[:2*WindowMost]) {
		t.Error("a window that fits is thinned")
	}
}
