package section

import (
	"math"
	"strings"
	"testing"

	"gaugelog/config"
)

func mm(v float64) config.Length { return config.Length{Quantity: config.Quantity{Value: v}} }

func session(t *testing.T, shape string) *Session {
	t.Helper()
	u := mm(0.02)
	s, err := New(config.Section{Shape: shape, U: &u})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func take(t *testing.T, s *Session, values ...float64) {
	t.Helper()
	for _, v := range values {
		if q, err := s.Take(Place{v, "x"}); q != "" || err != nil {
			t.Fatalf("%g: %q %v", v, q, err)
		}
	}
}

// E goes with 1/(b h^3): by hand for b = 140, h = 38 and u = 0.02 mm each, the
// places alike, u(E)/E = sqrt((0.02/140)^2 + (3*0.02/38)^2).
func TestWhatItDoesToE(t *testing.T) {
	s := session(t, "rectangle")
	take(t, s, 140, 140, 140)
	if more, err := s.Next(); !more || err != nil || s.Dimension() != "depth" {
		t.Fatal(more, err)
	}
	take(t, s, 38, 38, 38)
	r, err := s.Finish()
	if err != nil {
		t.Fatal(err)
	}
	w, d := 0.02/140, 3*0.02/38
	for _, c := range []struct{ got, want float64 }{
		{r.URelative, math.Hypot(w, d)}, {r.Dimensions[0].URelative, w}, {r.Dimensions[1].URelative, d}, {r.SecondMoment, 140 * 38 * 38 * 38 / 12.0},
	} {
		if math.Abs(c.got/c.want-1) > 1e-5 {
			t.Errorf("%g, want %g", c.got, c.want)
		}
	}
}

// The range: at the least depth everywhere the modulus would be (mean/least)^3.
func TestRange(t *testing.T) {
	s := session(t, "round")
	take(t, s, 30, 30.3, 30.1)
	r, err := s.Finish()
	if err != nil {
		t.Fatal(err)
	}
	d := r.Dimensions[0]
	if m := (30 + 30.3 + 30.1) / 3; math.Abs(d.AtLeast-(math.Pow(m/30, 4)-1)) > 1e-12 || math.Abs(d.AtMost-(math.Pow(m/30.3, 4)-1)) > 1e-12 {
		t.Errorf("%+v", d)
	}
	scatter := math.Sqrt((math.Pow(30-30.13333333333333, 2) + math.Pow(30.3-30.13333333333333, 2) + math.Pow(30.1-30.13333333333333, 2)) / 2 / 3)
	if want := 4 * math.Hypot(0.02, scatter) / 30.13333333333333; math.Abs(d.URelative/want-1) > 1e-4 || math.Abs(r.URelative/want-1) > 1e-4 {
		t.Errorf("u %g and %g, want %g", d.URelative, r.URelative, want)
	}
}

func TestOutlier(t *testing.T) {
	s := session(t, "round")
	take(t, s, 38.0, 38.1)
	q, err := s.Take(Place{83.1, "83.1 mm"})
	if err != nil || !strings.Contains(q, "83.1 mm is +45.05\u202fmm") {
		t.Fatalf("%q %v", q, err)
	}
	if _, err := s.Finish(); err == nil {
		t.Error("finished with a place in question")
	}
	take(t, s, 38.1) // measured anew: the slip of the pen is gone
	if n := len(s.Places("diameter")); n != 3 || s.Held() != nil {
		t.Errorf("%d places, held %v", n, s.Held())
	}
	// One that is really there: measured again the same, it counts once.
	if q, _ := s.Take(Place{41, "41 mm"}); q == "" {
		t.Error("41 mm was not questioned")
	}
	take(t, s, 41.02)
	// Or kept at once.
	if q, _ := s.Take(Place{45, "45 mm"}); q == "" {
		t.Error("45 mm was not questioned")
	}
	if err := s.Keep(); err != nil || len(s.Places("diameter")) != 5 {
		t.Errorf("%v %v", err, s.Places("diameter"))
	}
	if err := s.Keep(); err == nil {
		t.Error("kept nothing")
	}
}

// A first place is held against the rig file's.
func TestFirstAgainstRigFile(t *testing.T) {
	s, _ := New(config.Section{Shape: "round", Diameter: []config.Length{mm(38)}})
	if q, _ := s.Take(Place{3.8, "3.8 mm"}); !strings.Contains(q, "38.00\u202fmm in the rig file") {
		t.Errorf("%q", q)
	}
}

func TestBack(t *testing.T) {
	s := session(t, "rectangle")
	if _, ok := s.Back(); ok {
		t.Error("took back what was never taken")
	}
	take(t, s, 140, 139)
	s.Next()
	if p, ok := s.Back(); !ok || p.MM != 139 || s.Dimension() != "width" {
		t.Errorf("%v %v %s", p, ok, s.Dimension())
	}
	s.Take(Place{14, "14"})
	if p, ok := s.Back(); !ok || p.MM != 14 || len(s.Places("width")) != 1 {
		t.Errorf("the one in question goes first: %v %v", p, s.Places("width"))
	}
}

func TestWrong(t *testing.T) {
	if _, err := New(config.Section{Shape: "general"}); err == nil {
		t.Error("a general section was measured")
	}
	s := session(t, "tube")
	for _, v := range []float64{0, -1, math.NaN(), math.Inf(1)} {
		if _, err := s.Take(Place{v, "x"}); err == nil {
			t.Errorf("%g was taken", v)
		}
	}
	if _, err := s.Next(); err == nil {
		t.Error("went on without a place")
	}
	take(t, s, 30)
	s.Next()
	take(t, s, 16) // a wall of more than half the diameter
	if _, err := s.Finish(); err == nil {
		t.Error("a tube without an inside was finished")
	}
}
