package simulators

import "testing"

func TestDemoRuns(t *testing.T) {
	d := DemoRig()
	s, err := New(Options{Rig: d.Rig, Truth: d.Truth, Faults: d.Faults, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for {
		st := s.Next(s.End(), 16000)
		for _, b := range st.Batches {
			n += len(b.Frames)
			if n < 40 {
				t.Logf("%q %d", b.Bytes[:min(80, len(b.Bytes))], len(b.Frames))
			}
		}
		for _, e := range st.Events {
			t.Logf("%v %v %v", e.Kind, float64(st.Reached)/3.6e12, e.Mark)
		}
		if st.Done {
			break
		}
	}
	t.Log(n, len(s.response.grid.times))
}
