package steps

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"
)

// inch is the factor between millimetres and inches, exact.
const inch = 25.4

// unitKeys looks for gauges whose unit key was pressed: the indication became
// 25.4 times less or more, as near as its resolution tells. It returns true
// where it changed a gauge's scale, so that the search must start over.
func (r *run) unitKeys() bool {
	for i := range r.events {
		e := &r.events[i]
		ruling := r.ruling(e)
		for g := range r.gauges {
			if !e.moved[g] || ruling != "" && ruling != string(UnitKey) {
				continue
			}
			if f := r.unitFactor(e, g); f != 0 {
				r.pressUnit(e, g, f)
				return true
			}
		}
	}
	return false
}

// unitFactor returns what the indication must be multiplied by behind the
// cluster, relative to before, 0 where the ratio is not 25.4.
func (r *run) unitFactor(e *cluster, g int) float64 {
	gg := &r.gauges[g]
	before, after := rawEdges(e, g)
	if len(before) == 0 || len(after) == 0 {
		return 0
	}
	// What the others did meanwhile this one may have done too: creep over a gap.
	slack := 0.0
	if e.gap {
		slack = 1.5 * e.others(g)
	}
	pressed := gg.factor(e.lo) // pressed back: less proof is needed
	// Right beside the cluster, so that creep does not spoil the ratio.
	b, a := lsq.Median(before[max(0, len(before)-3):]), lsq.Median(after[:min(3, len(after))])
	for _, f := range []float64{inch, 1 / inch} {
		// The coarser side's half count, in the unit of the finer.
		small := math.Abs(a)
		if f < 1 {
			small = math.Abs(b)
		}
		res := gg.res
		if shownFiner(after, res) && f > 1 || shownFiner(before, res) && f < 1 {
			res /= 10 // an inch display shows about the count of the other one
		}
		tol := inch*res*1.01 + 4*gg.noise*math.Sqrt(2) + slack
		diff := math.Abs(a*f - b)
		if f < 1 {
			diff = math.Abs(a - b*inch)
		}
		back := math.Abs(pressed*f-1) < 1e-9 && pressed != 1
		if (small > 12*res && small*inch > 10*tol || back && small*inch > 3*tol) && diff <= tol {
			return f
		}
	}
	return 0
}

// shownFiner says that indications are no multiples of the gauge's count in mm:
// they are shown in another unit.
func shownFiner(mm []float64, res float64) bool {
	for _, v := range mm {
		if n := v / res; math.Abs(n-math.Round(n)) > 0.02 {
			return true
		}
	}
	return false
}

// others is how far any other gauge got away from where it was, over a cluster,
// mm.
func (c *cluster) others(g int) float64 {
	most := 0.0
	for o := range c.jump {
		if o != g && c.known[o] {
			most = max(most, math.Abs(c.near[o].MM))
		}
	}
	return most
}

// pressUnit notes the key and rescales the readings until it is pressed back.
func (r *run) pressUnit(e *cluster, g int, f float64) {
	gg := &r.gauges[g]
	t := e.hi
	if n := len(gg.scales); n > 0 && gg.scales[n-1].to == 0 && math.Abs(gg.scales[n-1].factor*f-1) < 1e-9 && t > gg.scales[n-1].from {
		gg.scales[n-1].to = t
	} else {
		gg.scales = append(gg.scales, scale{from: t, factor: f})
	}
	gg.refresh(r.h)
	r.keys = append(r.keys, key{g, e.lo, e.hi, f})
}

// key is one press of a unit key.
type key struct {
	gauge  int
	lo, hi int64
	factor float64
}

// reportKeys lists the presses found as disturbances.
func (r *run) reportKeys() {
	for i := 0; i < len(r.keys); i++ {
		k := r.keys[i]
		d := Disturbance{Kind: UnitKey, Gauges: []int{k.gauge}, From: k.lo,
			Treated:  "readings from then on converted",
			Evidence: fmt.Sprintf("the indication of gauge %s changed by the factor 25.4 within its resolution", r.name(k.gauge))}
		for _, other := range r.keys[i+1:] {
			if other.gauge == k.gauge {
				d.To = other.hi
				r.keys = removeKey(r.keys, other)
				break
			}
		}
		r.exclude(k.gauge, k.lo, k.hi, string(UnitKey))
		r.add(d)
	}
}

// toldKeys reports the unit keys that the recording saw: those gauges send
// their unit, and every reading was converted as it came.
func (r *run) toldKeys() {
	open := map[int]int{} // gauge: index of its disturbance
	for _, e := range r.h.Events {
		g := r.gauge(e.Gauge)
		if e.Kind != "unit-key" || g < 0 {
			continue
		}
		if i, ok := open[g]; ok {
			r.out.Disturbances[i].To = e.Time
			delete(open, g)
			continue
		}
		open[g] = len(r.out.Disturbances)
		r.add(Disturbance{Kind: UnitKey, Gauges: []int{g}, From: e.Time,
			Treated:  "every reading was converted as it came; nothing is taken off",
			Evidence: fmt.Sprintf("the recording saw the unit change: %s", e.Detail)})
	}
}

func removeKey(list []key, k key) []key {
	var out []key
	for _, v := range list {
		if v != k {
			out = append(out, v)
		}
	}
	return out
}

// acts believes the marked acts on gauges: the jump of that gauge nearest to
// the mark is its doing.
func (r *run) acts() {
	lifted := map[int]int64{}
	for _, m := range r.h.Marks {
		if m.Kind != "touch" {
			continue
		}
		g := r.gauge(m.Gauge)
		if g < 0 {
			r.warn("unknown-gauge", -1, m.Time, fmt.Sprintf("a mark names gauge %q, which the rig file does not; it was left out", m.Gauge))
			continue
		}
		e, own := r.answer(g, m.Time)
		if e == nil {
			r.warn("act-without-response", g, m.Time, fmt.Sprintf("gauge %s was marked as %s, but its readings show nothing near that time%s", m.Gauge, m.Act, r.butLoads(g, m.Time)))
			continue
		}
		kind := GaugeKnock
		if m.Act == "zeroed" {
			kind = ZeroPressed
		}
		e.jump[g] = own
		r.act(e, g, Disturbance{Kind: kind, Marked: true, Evidence: fmt.Sprintf("marked: %s %s", r.name(g), m.Act)})
		if from, off := lifted[g]; off {
			r.exclude(g, from, e.hi, "off the beam") // until it was set down, or whatever was marked next
			delete(lifted, g)
		}
		if m.Act == "lifted" {
			lifted[g] = e.lo
		}
	}
}

// act takes one gauge's jump out of a cluster and reports it as d says. What
// the other gauges did in it stays to be explained.
func (r *run) act(e *cluster, g int, d Disturbance) {
	d.Gauges, d.From, d.By = []int{g}, e.lo+(e.hi-e.lo)/2, []Value{e.jump[g]}
	d.Treated = "offset taken off as a parameter with its uncertainty"
	d.Size = largest(d.By)
	r.add(d)
	r.offset(e, []int{g}, d.Kind)
	r.exclude(g, e.lo, e.hi, string(d.Kind))
	e.without(g)
}

// without takes a gauge out of a cluster: the others' part stays.
func (c *cluster) without(g int) {
	c.known[g], c.moved[g], c.peak[g] = false, false, 0
	if len(c.movedGauges()) == 0 {
		c.taken = true
	}
}

// weakResponses looks again at marks whose loads were too small to stand out
// by themselves: all gauges together, in the expected proportions, may still
// show them.
func (r *run) weakResponses() {
	for i, c := range r.changes {
		if r.matched[i] >= 0 {
			continue
		}
		e, ok := r.around(c.mark())
		if !ok {
			continue
		}
		if e == nil {
			continue
		}
		v := r.expected(c)
		num, den := 0.0, 0.0
		for g := range v {
			if e.known[g] {
				u := r.jumpU(e, g)
				num += v[g] * e.jump[g].MM / sq(u)
				den += sq(v[g] / u)
			}
		}
		if den > 0 && num/math.Sqrt(den) > 4 && r.alike(e, v) > 0.6 {
			e.taken = true
			e.weak = true
			r.events = append(r.events, *e)
			r.matched[i] = len(r.events) - 1
		}
	}
}

// around makes a cluster of the readings on either side of a mark; ok is
// false where something else happened there.
func (r *run) around(t int64) (*cluster, bool) {
	reach := r.near(t)
	half := max(10*second, nanos(r.spacing(t)))
	for i := range r.events {
		if r.events[i].lo < t+half && r.events[i].hi > t-half {
			return nil, false
		}
	}
	raw, err := r.h.Window(t-reach, t+reach)
	if err != nil {
		return nil, false
	}
	c := &cluster{lo: t - half, hi: t + half}
	n := len(r.gauges)
	c.raw = make([][]point, n)
	c.clear(n)
	for g := range r.gauges {
		for _, s := range raw[g] {
			c.raw[g] = append(c.raw[g], r.gauges[g].fromSample(s))
		}
		c.measureGauge(&r.gauges[g], t-reach, t+reach)
	}
	return c, true
}
