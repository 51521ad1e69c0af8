package steps

import (
	"fmt"
	"math"
)

// overSupport is how near a support's place a gauge must stand to see that
// support's movement: a fifth of the depth, and at least 5 mm.
func (r *run) overSupport() float64 {
	d := 0.0
	for _, v := range r.h.Rig.Specimen.Section.Depth {
		d = max(d, v.Value)
	}
	return max(5, d/5)
}

// supportUnder returns the support a gauge follows, -1 for none: the nearest
// for one that sees a seat, one at its very place for one that sees the beam.
func (r *run) supportUnder(g int) int {
	cfg := &r.h.Rig.Gauges[g]
	if cfg.Sees == "reference" || len(cfg.Bar) == 2 {
		return -1
	}
	best, dist := -1, math.Inf(1)
	for s, sup := range r.h.Rig.Supports {
		if d := math.Abs(sup.At.Value - cfg.At.Value); d < dist {
			best, dist = s, d
		}
	}
	if cfg.Sees == "seat" || dist <= r.overSupport() {
		return best
	}
	return -1
}

// supportGauges returns the gauge over each support, -1 where none; one that
// sees the beam goes before one on the seat, for it also nets the crushing of
// the bearing.
func (r *run) supportGauges() []int {
	over := make([]int, len(r.h.Rig.Supports))
	for s := range over {
		over[s] = -1
	}
	for g := range r.gauges {
		s := r.supportUnder(g)
		if s < 0 || len(r.gauges[g].seq) == 0 {
			continue
		}
		if over[s] < 0 || r.seesBeam(g) && !r.seesBeam(over[s]) {
			over[s] = g
		}
	}
	return over
}

// chordShares returns how much of the left and the right support's movement a
// gauge at a place shares: the straight line through both, also beyond them.
func chordShares(x, left, right float64) (l, r float64) {
	return (right - x) / (right - left), (x - left) / (right - left)
}

// chooseChord settles which correction the run allows.
func (r *run) chooseChord() {
	sup := r.h.Rig.Supports
	over := r.supportGauges()
	c := Chord{How: "none", Left: -1, Right: -1}
	switch {
	case len(sup) != 2:
		c.How = "not-applicable"
		c.Text = fmt.Sprintf("%d supports: a straight line through two gauges does not tell the sag of such a beam; sags are not corrected for support movement", len(sup))
		r.warn("support-movement-uncorrected", -1, 0, c.Text)
	case over[0] >= 0 && over[1] >= 0:
		c.How, c.Left, c.Right = "both", over[0], over[1]
		c.Text = fmt.Sprintf("support movement taken off by the straight line through gauges %s and %s", r.name(over[0]), r.name(over[1]))
	case over[0] >= 0 || over[1] >= 0:
		c.How, c.Left, c.Right = "one-sided", over[0], over[1]
		have, miss := over[0], sup[1].Name
		if have < 0 {
			have, miss = over[1], sup[0].Name
		}
		c.Text = fmt.Sprintf("only one support is measured (gauge %s): half corrected; support %s may have moved as much again, and uncertainties are widened by that", r.name(have), miss)
		r.warn("one-sided-support-gauge", have, 0, c.Text)
	default:
		c.Text = "no gauge follows a support: sags contain the supports' movement"
		r.warn("no-support-gauges", -1, 0, c.Text)
	}
	r.out.Chord = c
}

// nets says whether a gauge's sag is to be corrected by the chord: it sees the
// beam, no bar nets it already, and the rig allows it.
func (r *run) nets(g int) bool {
	how := r.out.Chord.How
	return (how == "both" || how == "one-sided") && r.seesBeam(g) && len(r.gauges[g].cfg.Bar) != 2
}

// net returns a gauge's sag less support movement. left and right are the
// gross sags of the support gauges at that instant, meaningless where absent.
func (r *run) net(g int, gross Value, left, right Value) Value {
	if !r.nets(g) {
		return gross
	}
	c := r.out.Chord
	sup := r.h.Rig.Supports
	a, b := chordShares(r.gauges[g].cfg.At.Value, sup[0].At.Value, sup[1].At.Value)
	switch {
	case c.How == "both":
		if g == c.Left || g == c.Right {
			return Value{0, gross.U}
		}
		return Value{gross.MM - a*left.MM - b*right.MM, hypot(gross.U, a*left.U, b*right.U)}
	case c.Left >= 0:
		if g == c.Left {
			return Value{0, gross.U}
		}
		return Value{gross.MM - a*left.MM, hypot(gross.U, a*left.U)}
	default:
		if g == c.Right {
			return Value{0, gross.U}
		}
		return Value{gross.MM - b*right.MM, hypot(gross.U, b*right.U)}
	}
}

// unseen is what a support without a gauge may have moved a gauge's sag by at
// the end of step k, mm, as a standard uncertainty: as much again as the one
// that is measured, rectangular. It is common to all readings of the step; 0
// where both supports are measured, or none.
func (r *run) unseen(g, k int) float64 {
	c := r.out.Chord
	if c.How != "one-sided" || !r.nets(g) || g == c.Left || g == c.Right {
		return 0
	}
	sup := r.h.Rig.Supports
	share, right := chordShares(r.gauges[g].cfg.At.Value, sup[0].At.Value, sup[1].At.Value)
	seen := c.Right
	if c.Left >= 0 {
		share, seen = right, c.Left
	}
	moved := 0.0
	for _, p := range r.out.Tracks[seen].Points {
		if p.Step > k {
			break
		}
		moved = p.Gross
	}
	return math.Abs(share*moved) / math.Sqrt(3)
}

func (r *run) name(g int) string { return r.h.Rig.Gauges[g].Name }
