package forward

import (
	"testing"

	"gaugelog/ingest/segment"
)

// TestNewestHasItsShare: after a long absence of the server what is newest
// comes with what is oldest, each point once, and the state says how far it is.
func TestNewestHasItsShare(t *testing.T) {
	const each, segments = 40_000, 5 // a segment is longer than a stretch
	fsys, state := runOf(t, each)
	h := segment.Header{Run: "run-1", Boot: "b", Rig: "00", Clock: segment.ClockState{Wall: start, Synced: true}}
	for k := 1; k < segments; k++ {
		write(t, fsys, k+1, h, k*each, (k+1)*each, true)
	}
	s := newServer(t)
	var f *Forwarder
	most := 0
	got, err := forwardRun(t, t.Context(), fsys, state, s.URL+"/write?db=lab", "", func(o *Options) {
		o.Lines = 5000
		tell := o.Tell
		o.Tell = func(n Notice) {
			tell(n)
			if f != nil {
				most = max(most, f.State().Segments)
			}
		}
		o.opened = func(x *Forwarder) { f = x }
	})
	if err != nil {
		t.Fatal(err)
	}
	s.wantAll(t, each*segments, nil)
	if s.twice > 0 || got.Sent != each*segments+1 {
		t.Errorf("%d twice, %+v", s.twice, got.Count)
	}
	first := func(i int) int {
		for n, body := range s.bodies {
			if hasLine(body, i) {
				return n
			}
		}
		t.Fatalf("reading %d never came", i)
		return 0
	}
	newest, oldest, second := first((segments-1)*each), first(0), first(2*each-1)
	if oldest > newest || newest > second {
		t.Errorf("the newest began with body %d, the oldest with %d, the second ended with %d", newest, oldest, second)
	}
	end := f.State()
	if most != segments || end.Segments != 0 || end.Newest != start+(each*segments-1)*1e9 || end.Sent != got.Sent || end.Held {
		t.Errorf("most %d segments behind, at the end %+v", most, end)
	}
}
