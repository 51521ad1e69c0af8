package beam

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// drawBeam makes a rig with overhangs, two to four supports (some clamped,
// some yielding) and up to two springs.
func drawBeam(t *rapid.T) Beam {
	l := rapid.Float64Range(100, 6000).Draw(t, "length")
	b := Beam{From: rapid.Float64Range(-500, 500).Draw(t, "from"), Length: l}
	b.EI = math.Pow(10, rapid.Float64Range(6, 12).Draw(t, "lgEI"))
	b.S = math.Inf(1)
	if rapid.Bool().Draw(t, "timoshenko") {
		b.S = b.EI / (l * l) * math.Pow(10, rapid.Float64Range(0, 4).Draw(t, "lgS"))
	}
	n := rapid.IntRange(2, 4).Draw(t, "supports")
	for i := range n {
		s := Support{At: b.From + l*(float64(i)+rapid.Float64Range(0.05, 0.95).Draw(t, "at"))/float64(n)}
		s.Clamp = rapid.IntRange(0, 4).Draw(t, "clamp") == 0
		if rapid.Bool().Draw(t, "yields") {
			s.Compliance = l * l * l / b.EI * math.Pow(10, rapid.Float64Range(-6, -2).Draw(t, "lgC"))
		}
		b.Supports = append(b.Supports, s)
	}
	for range rapid.IntRange(0, 2).Draw(t, "springs") {
		b.Springs = append(b.Springs, Spring{At: drawPlace(t, b), Stiffness: b.EI / (l * l * l) * math.Pow(10, rapid.Float64Range(-4, 2).Draw(t, "lgK"))})
	}
	return b
}

func drawPlace(t *rapid.T, b Beam) float64 {
	return b.From + b.Length*rapid.Float64Range(0, 1).Draw(t, "place")
}

func drawLoads(t *rapid.T, b Beam) []Load {
	var out []Load
	for range rapid.IntRange(1, 4).Draw(t, "loads") {
		x, y := drawPlace(t, b), drawPlace(t, b)
		if rapid.Bool().Draw(t, "point") {
			y = x
		}
		out = append(out, Spread(math.Min(x, y), math.Max(x, y), float64(rapid.IntRange(1, 1500).Draw(t, "force"))*rapid.SampledFrom([]float64{1, -0.3}).Draw(t, "sense")))
	}
	return out
}

func mustSolve(t *rapid.T, b Beam, loads []Load) *Solution {
	s, err := b.Solve(loads)
	if err != nil {
		t.Fatalf("%+v: %v", b, err)
	}
	return s
}

// size is the scale errors are held against: the greatest sag or rise, with a
// floor for beams so stiffly held that their sag is all rounding (1e-5 of the
// beam's own flexibility times the loads).
func size(s *Solution, b Beam) float64 {
	total := 0.0
	for _, p := range s.points {
		total += math.Abs(p.force)
	}
	for _, p := range s.patches {
		total += math.Abs(p.force)
	}
	return 1e-5*total*s.d + math.Max(math.Abs(s.Greatest(b.From, b.End()).Value), math.Abs(s.Least(b.From, b.End()).Value))
}

func TestEquilibrium(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBeam(t)
		loads := drawLoads(t, b)
		s := mustSolve(t, b, loads)
		force, moment, all := 0.0, 0.0, 0.0
		for _, l := range loads {
			force += l.Force
			moment += l.Force * ((l.From+l.To)/2 - b.From)
			all += math.Abs(l.Force)
		}
		for _, r := range s.Reactions() {
			force -= r.Force
			moment -= r.Force * (r.At - b.From)
			moment += r.Moment
			all += math.Abs(r.Force)
		}
		for _, r := range s.SpringForces() {
			force -= r.Force
			moment -= r.Force * (r.At - b.From)
		}
		if math.Abs(force) > 1e-9*all || math.Abs(moment) > 1e-9*all*b.Length {
			t.Fatalf("sum of forces %g N, of moments %g N.mm", force, moment)
		}
		if m := s.Moment(b.From); math.Abs(m) > 1e-9*all*b.Length && !clampAt(b, b.From) {
			t.Fatalf("moment at the free left end %g", m)
		}
	})
}

func clampAt(b Beam, x float64) bool {
	for _, s := range b.Supports {
		if s.Clamp && math.Abs(s.At-x) < 1e-6*b.Length {
			return true
		}
	}
	return false
}

func TestLinearityAndReciprocity(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBeam(t)
		one, two := drawLoads(t, b), drawLoads(t, b)
		f := rapid.Float64Range(-3, 3).Draw(t, "factor")
		both := append([]Load(nil), one...)
		for _, l := range two {
			l.Force *= f
			both = append(both, l)
		}
		s1, s2, s := mustSolve(t, b, one), mustSolve(t, b, two), mustSolve(t, b, both)
		x := drawPlace(t, b)
		scale := size(s1, b) + math.Abs(f)*size(s2, b)
		if got, want := s.Deflection(x), s1.Deflection(x)+f*s2.Deflection(x); math.Abs(got-want) > 1e-8*scale {
			t.Fatalf("sum of loads %g, sum of sags %g", got, want)
		}
		p, q := drawPlace(t, b), drawPlace(t, b)
		c, err := b.Influence([]float64{p, q}, []Load{Point(p, 0), Point(q, 0)})
		if err != nil {
			t.Fatal(err)
		}
		if d := math.Abs(c.At(0, 1) - c.At(1, 0)); d > 1e-8*math.Max(c.At(0, 0), c.At(1, 1)) {
			t.Fatalf("Maxwell: %g against %g", c.At(0, 1), c.At(1, 0))
		}
	})
}

// The slope is the line's derivative, and no sampled sag exceeds the greatest.
func TestLineIsConsistent(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBeam(t)
		s := mustSolve(t, b, drawLoads(t, b))
		scale := size(s, b)
		g, l := s.Greatest(b.From, b.End()), s.Least(b.From, b.End())
		for i := range 101 {
			x := b.From + b.Length*float64(i)/100
			if v := s.Deflection(x); v > g.Value+1e-10*scale || v < l.Value-1e-10*scale {
				t.Fatalf("sag %g at %g mm lies outside %g..%g", v, x, l.Value, g.Value)
			}
			if m := math.Abs(s.Moment(x)); m > math.Abs(s.MaxMoment().Value)*(1+1e-9)+1e-6 {
				t.Fatalf("moment %g at %g mm exceeds the greatest, %g", m, x, s.MaxMoment().Value)
			}
		}
		cuts := s.places()
		for i := 1; i < len(cuts); i++ {
			lo, hi := s.place(cuts[i-1]), s.place(cuts[i])
			if hi-lo < 1e-3*b.Length {
				continue
			}
			x, h := (lo+hi)/2, (hi-lo)/64
			num := (s.Deflection(x-2*h) - 8*s.Deflection(x-h) + 8*s.Deflection(x+h) - s.Deflection(x+2*h)) / (12 * h)
			if d := math.Abs(num - s.Slope(x)); d > 1e-6*scale/(hi-lo) {
				t.Fatalf("slope %g, difference quotient %g at %g mm", s.Slope(x), num, x)
			}
		}
	})
}

// A stiffness matrix assembled from Timoshenko elements with consistent end
// loads (the textbook's, as in the package comment) must give the same sags
// at its nodes: other mathematics, for the same beams.
func TestAgainstElements(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBeam(t)
		loads := drawLoads(t, b)
		places := []float64{drawPlace(t, b), drawPlace(t, b)}
		s := mustSolve(t, b, loads)
		got, ok := elements(b, loads, places)
		if !ok {
			return // elements too short for the matrix method
		}
		scale := size(s, b)
		for i, x := range places {
			if d := math.Abs(got[i] - s.Deflection(x)); d > 1e-6*scale {
				t.Fatalf("at %g mm: elements %.12g, line %.12g (greatest %g)", x, got[i], s.Deflection(x), scale)
			}
		}
	})
}

// elements solves by direct stiffness; ok is false where an element is
// shorter than a hundredth of the beam and digits would be lost.
func elements(b Beam, loads []Load, places []float64) ([]float64, bool) {
	nodes := []float64{b.From, b.End()}
	nodes = append(nodes, places...)
	for _, s := range b.Supports {
		nodes = append(nodes, s.At)
	}
	for _, s := range b.Springs {
		nodes = append(nodes, s.At)
	}
	for _, l := range loads {
		nodes = append(nodes, l.From, l.To)
	}
	nodes = distinct(nodes)
	for i := 1; i < len(nodes); i++ {
		if nodes[i]-nodes[i-1] < 0.01*b.Length {
			return nil, false
		}
	}
	find := func(x float64) int {
		for i, n := range nodes {
			if n == x {
				return i
			}
		}
		panic("place is no node")
	}
	n := 2 * len(nodes)
	k, f := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for e := 1; e < len(nodes); e++ {
		l := nodes[e] - nodes[e-1]
		phi := 12 * b.EI / (b.S * l * l)
		c := b.EI / (l * l * l * (1 + phi))
		ke := [4][4]float64{{12, 6 * l, -12, 6 * l}, {6 * l, (4 + phi) * l * l, -6 * l, (2 - phi) * l * l}, {-12, -6 * l, 12, -6 * l}, {6 * l, (2 - phi) * l * l, -6 * l, (4 + phi) * l * l}}
		for i := range 4 {
			for j := range 4 {
				k.Set(2*e-2+i, 2*e-2+j, k.At(2*e-2+i, 2*e-2+j)+c*ke[i][j])
			}
		}
		for _, ld := range loads {
			if ld.To > ld.From && nodes[e-1] >= ld.From && nodes[e] <= ld.To {
				q := ld.Force / (ld.To - ld.From)
				for i, v := range []float64{q * l / 2, q * l * l / 12, q * l / 2, -q * l * l / 12} {
					f.SetVec(2*e-2+i, f.AtVec(2*e-2+i)+v)
				}
			}
		}
	}
	for _, ld := range loads {
		if ld.To == ld.From {
			f.SetVec(2*find(ld.From), f.AtVec(2*find(ld.From))+ld.Force)
		}
	}
	var fixed []int
	for _, s := range b.Supports {
		i := 2 * find(s.At)
		if s.Compliance > 0 {
			k.Set(i, i, k.At(i, i)+1/s.Compliance)
		} else {
			fixed = append(fixed, i)
		}
		if s.Clamp {
			fixed = append(fixed, i+1)
		}
	}
	for _, s := range b.Springs {
		i := 2 * find(s.At)
		k.Set(i, i, k.At(i, i)+s.Stiffness)
	}
	for _, i := range fixed {
		for j := range n {
			k.Set(i, j, 0)
			k.Set(j, i, 0)
		}
		k.Set(i, i, b.EI/(b.Length*b.Length*b.Length))
		f.SetVec(i, 0)
	}
	var u mat.VecDense
	if err := u.SolveVec(k, f); err != nil {
		if _, poor := err.(mat.Condition); !poor {
			return nil, false
		}
	}
	out := make([]float64, len(places))
	for i, x := range places {
		out[i] = u.AtVec(2 * find(x))
	}
	return out, true
}

func distinct(v []float64) []float64 {
	var out []float64
	for _, x := range v {
		at := 0
		for at < len(out) && out[at] < x {
			at++
		}
		if at < len(out) && out[at] == x {
			continue
		}
		out = append(out[:at], append([]float64{x}, out[at:]...)...)
	}
	return out
}
