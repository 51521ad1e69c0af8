package analysis

import (
	"math"

	"gaugelog/analysis/steps"
	"gaugelog/config"
)

// instrument is what the gauges themselves add to the uncertainty of a net
// sag, beside the scatter that the steps carry: the stated u of an indication,
// at the baseline and at the reading, and the gain's u in proportion. Gauges
// over the supports enter by their share in the chord (practice: the chord
// correction is linear in the three readings).
type instrument struct {
	rig   *config.Rig
	chord steps.Chord
	// floor counts a gauge's resolution where its u is not stated: for figures
	// averaged over many readings, whose scatter does not hold it.
	floor bool
}

// own is the part of one gauge that does not grow with the sag, mm.
func (n instrument) own(g int) float64 {
	if u := n.rig.Gauges[g].U; u != nil {
		return math.Sqrt2 * u.Value
	}
	if n.floor {
		return math.Sqrt2 * n.rig.Gauges[g].Resolution.Value / math.Sqrt(12)
	}
	return 0
}

// uGain is the relative standard uncertainty of a gauge's gain.
func (n instrument) uGain(g int) float64 {
	c := n.rig.Gauges[g].Calibration
	if c == nil || c.UGain == nil || c.Gain.Value == 0 {
		return 0
	}
	return c.UGain.Value / math.Abs(c.Gain.Value)
}

// net is the whole instrument part of gauge g's net sag mm.
func (n instrument) net(g int, mm float64) float64 {
	u := math.Hypot(n.own(g), n.uGain(g)*mm)
	l, r := n.chord.Left, n.chord.Right
	if l < 0 || r < 0 || n.chord.How != "both" || len(n.rig.Gauges[g].Bar) == 2 || !touches(n.rig.Gauges[g]) {
		return u
	}
	a, b := n.rig.Gauges[l].At.Value, n.rig.Gauges[r].At.Value
	if g == l || g == r || a == b {
		return n.own(g)
	}
	x := n.rig.Gauges[g].At.Value
	return math.Hypot(u, math.Hypot((b-x)/(b-a)*n.own(l), (x-a)/(b-a)*n.own(r)))
}

// ratio adds the instrument part to a ratio q of two sags read by gauge g with
// one baseline between them: gain and load cancel, the three indications'
// errors do not. reference is the sag divided by, mm.
func (n instrument) ratio(q *Q, g int, reference float64) *Q {
	if q == nil || reference == 0 {
		return q
	}
	one := n.net(g, 0) / math.Sqrt2
	u := one / math.Abs(reference) * math.Sqrt(1+q.Value*q.Value+(q.Value-1)*(q.Value-1))
	if q.U != nil {
		u = math.Hypot(u, *q.U)
	}
	if u > 0 {
		q.U = &u
	}
	return q
}

// widen adds the instrument part to a net sag's uncertainty.
func (n instrument) widen(q *Q, g int) *Q {
	if q == nil {
		return nil
	}
	u := n.net(g, q.Value)
	if q.U != nil {
		u = math.Hypot(u, *q.U)
	}
	if u > 0 {
		q.U = &u
	}
	return q
}
