package steps

import (
	"fmt"
	"math"
)

// The baseline is read from 65 s to 5 s before the first movement, and
// farther back where that holds fewer than ten readings.
const (
	baselineFrom  = 65 * second
	baselineTo    = 5 * second
	baselineLeast = 10
)

// baseline takes each gauge's level at the end of the baseline step.
func (r *run) baseline() error {
	k := r.out.Baseline
	s := r.out.Steps[k]
	end := s.To
	if k+1 < len(r.parts) {
		if e := r.parts[k+1].event; e != nil {
			end = min(end, e.lo)
		}
		end -= min(baselineTo, (end-s.From)/10)
	}
	from := max(s.From, end-baselineFrom+baselineTo)
	if s.Full != 0 {
		from = max(from, s.Full)
	}
	r.out.BaselineFrom, r.out.BaselineTo = from, end
	raw, err := r.h.Window(min(from, end), end)
	if err != nil {
		return fmt.Errorf("reading back the baseline: %w", err)
	}
	for g := range r.gauges {
		gg := &r.gauges[g]
		t := &r.out.Tracks[g]
		var y []float64
		for _, p := range raw[g] {
			if !r.excluded(g, p.Time, p.Time+1) {
				y = append(y, gg.sag(p.MM*gg.factor(p.Time), p.Time)-t.shift(p.Time))
			}
		}
		if len(y) < baselineLeast {
			y = r.widerBaseline(g, k, end)
		}
		if len(y) == 0 {
			r.noBaseline(g, t)
			continue
		}
		t.Baseline = Location(y, gg.res)
		t.Baseline.U = max(t.Baseline.U, 1.253*gg.noise/math.Sqrt(float64(len(y))))
	}
	return nil
}

// widerBaseline takes the last ten cells of the baseline step.
func (r *run) widerBaseline(g, k int, end int64) []float64 {
	var y []float64
	t := &r.out.Tracks[g]
	for i := len(t.Points) - 1; i >= 0 && len(y) < baselineLeast; i-- {
		if p := t.Points[i]; p.Step == k && p.Time <= end {
			y = append(y, p.Gross-t.shift(p.Time))
		}
	}
	return y
}

// noBaseline counts a gauge's sags from its first reading instead.
func (r *run) noBaseline(g int, t *Track) {
	if len(t.Points) == 0 {
		return
	}
	p := t.Points[0]
	t.Baseline = Value{p.Gross - t.shift(p.Time), p.U}
	r.warn("no-baseline", g, p.Time, fmt.Sprintf("gauge %s has no reading before the first load: its sags count from its first reading, in step %s", r.name(g), r.out.Steps[p.Step].Name))
}

// side is one of the two sags of a point.
type side func(Point) (v, u float64)

func grossOf(p Point) (float64, float64) { return p.Gross, p.U }
func netOf(p Point) (float64, float64)   { return p.Net, p.NetU }

// figures reads every gauge's sags in every step.
func (r *run) figures() {
	for g := range r.gauges {
		by := r.byStep(g)
		for k := range r.out.Steps {
			f := &r.out.Steps[k].Gauges[g]
			f.Gross = r.read(g, k, by, grossOf, r.commonGross(g, k))
			f.Net = r.read(g, k, by, netOf, r.commonNet(g, k))
			if f.Gross.Increment != nil {
				f.Gross.Increment.U = hypot(f.Gross.Increment.U, r.offsetU(g, k))
			}
			if f.Net.Increment != nil && k > 0 {
				offsets := r.netU(g, func(g int) float64 { return r.offsetU(g, k) })
				f.Net.Increment.U = hypot(f.Net.Increment.U, offsets, r.unseen(g, k)-r.unseen(g, k-1))
			}
		}
	}
}

func (r *run) byStep(g int) [][]Point {
	out := make([][]Point, len(r.out.Steps))
	for _, p := range r.out.Tracks[g].Points {
		out[p.Step] = append(out[p.Step], p)
	}
	return out
}

// commonGross is the uncertainty all readings of a gauge in a step share: its
// baseline's and that of the offsets taken off since.
func (r *run) commonGross(g, k int) float64 {
	t := &r.out.Tracks[g]
	return hypot(t.Baseline.U, t.shiftU(r.out.BaselineTo, r.out.Steps[k].To))
}

func (r *run) commonNet(g, k int) float64 {
	return hypot(r.netU(g, func(g int) float64 { return r.commonGross(g, k) }), r.unseen(g, k))
}

// netU is what uncertainties of the gauges' own sags make of a net one.
func (r *run) netU(g int, own func(g int) float64) float64 {
	c := r.out.Chord
	var left, right Value
	if c.Left >= 0 {
		left.U = own(c.Left)
	}
	if c.Right >= 0 {
		right.U = own(c.Right)
	}
	return r.net(g, Value{0, own(g)}, left, right).U
}

// offsetU is the uncertainty of the offsets of gauge g that lie between what
// an increment of step k counts from and the initial sag.
func (r *run) offsetU(g, k int) float64 {
	s := r.out.Steps[k]
	return r.out.Tracks[g].shiftU(s.From, s.Full+nanos(r.initialAfter()))
}

// initialAfter is the time after full load of the initial sag, s.
func (r *run) initialAfter() float64 {
	if after := r.h.Rig.Read.InitialAfter.Value; after != 0 {
		return after
	}
	return 60
}

// read takes one gauge's figures in one step.
func (r *run) read(g, k int, by [][]Point, of side, common float64) Figures {
	var f Figures
	s := r.out.Steps[k]
	pts := by[k]
	if len(pts) == 0 {
		return f
	}
	floor := floorU(r.gauges[g].res)
	seal := func(v Value) *Value {
		v.U = hypot(max(v.U, floor), common)
		return &v
	}
	if s.Full == 0 {
		if v, ok := tail(pts, pts[0].Time-second, of); ok {
			f.Final = seal(v)
		}
		return f
	}
	if v, ok := tail(pts, s.Full, of); ok {
		f.Final = seal(v)
	}
	after := r.initialAfter()
	firstAt := seconds(pts[0].Time - s.Full)
	if v, ok := r.readAt(g, pts, s.Full, after, of); ok {
		f.Initial = seal(v)
		if t, ok := r.trend(g, k, by, s.Full+nanos(after), of); ok {
			inc := Value{v.MM - t.MM, hypot(max(v.U, floor), max(t.U, floor), t.model)}
			f.Increment, f.Carried = &inc, -t.model
		}
	} else if firstAt > after {
		y, u := of(pts[0])
		f.SagAt = append(f.SagAt, SagAt{AfterS: firstAt, Value: *seal(Value{y, u}), First: true})
	}
	for _, d := range r.h.Rig.Read.Times {
		if v, ok := r.readAt(g, pts, s.Full, d.Value, of); ok {
			f.SagAt = append(f.SagAt, SagAt{AfterS: d.Value, Value: *seal(v)})
		}
	}
	return f
}

// readAt reads the sag a time after full load by a local fit in its logarithm
// over an octave on either side.
func (r *run) readAt(g int, pts []Point, full int64, after float64, of side) (Value, bool) {
	last := seconds(pts[len(pts)-1].Time - full)
	reach := max(1.5*r.gauges[g].interval, 0.06*after)
	if after > last+reach || after < seconds(pts[0].Time-full) {
		return Value{}, false
	}
	var x, y, u []float64
	for _, p := range pts {
		t := seconds(p.Time - full)
		if t < after/2 || t > after*2 || t <= 0 {
			continue
		}
		v, s := of(p)
		x, y, u = append(x, math.Log(t)), append(y, v), append(u, s)
	}
	at := math.Log(after)
	if len(x) >= 5 {
		degree := 2
		if x[len(x)-1] < at {
			degree = 1 + len(x)/12 // at the end a bend is dearly bought
			degree = min(degree, 2)
		}
		if f, ok := fitPoly(x, y, u, degree); ok {
			return Value{f.at(at), f.u(at)}, true
		}
	}
	return between(pts, full, after, of)
}

// between interpolates in the logarithm of time between two neighbours.
func between(pts []Point, full int64, after float64, of side) (Value, bool) {
	for i := range pts {
		t := seconds(pts[i].Time - full)
		if t < after || t <= 0 {
			continue
		}
		v, u := of(pts[i])
		if i == 0 || seconds(pts[i-1].Time-full) <= 0 {
			return Value{v, u}, t == after
		}
		a := seconds(pts[i-1].Time - full)
		va, ua := of(pts[i-1])
		f := math.Log(after/a) / math.Log(t/a)
		// What the curve does between two readings is known to a tenth of the rise.
		return Value{va + f*(v-va), hypot(max(u, ua), 0.1*(v-va)*math.Min(1, 4*f*(1-f)))}, true
	}
	v, u := of(pts[len(pts)-1])
	return Value{v, u}, true
}

// tail reads the sag at the end of a step: a local fit over its last half.
func tail(pts []Point, full int64, of side) (Value, bool) {
	last := seconds(pts[len(pts)-1].Time - full)
	if last <= 0 {
		return Value{}, false
	}
	var x, y, u []float64
	for _, p := range pts {
		if t := seconds(p.Time - full); t >= last/2 && t > 0 {
			v, s := of(p)
			x, y, u = append(x, math.Log(t)), append(y, v), append(u, s)
		}
	}
	if len(x) >= 5 {
		if f, ok := fitPoly(x, y, u, 1); ok {
			return Value{f.at(math.Log(last)), f.u(math.Log(last))}, true
		}
	}
	v, s := of(pts[len(pts)-1])
	return Value{v, s}, true
}

// carried is a trend carried forward: its value with the readings' own
// uncertainty, and with its sign what the choice of the curve may err by.
type carried struct {
	Value
	model float64
}

// trend carries the former steps' creep forward to t: a straight line in the
// logarithm of the former step's time through its last half, bent where there
// are readings enough to tell how it bends. Half of what bending changed, as a
// rectangle, stays as the doubt about the curve; where nothing could be bent,
// all that a longer stretch would have said differently.
func (r *run) trend(g, k int, by [][]Point, t int64, of side) (carried, bool) {
	prev := r.out.Steps[k-1]
	pts := by[k-1]
	if k-1 == r.out.Baseline {
		return carried{Value{0, r.commonGross(g, k-1)}, 0}, len(pts) > 0
	}
	if len(pts) == 0 {
		return carried{}, false
	}
	end := pts[len(pts)-1]
	if prev.Full == 0 {
		v, u := of(end)
		return carried{Value{v, u}, 0}, true
	}
	last, at := seconds(end.Time-prev.Full), math.Log(seconds(t-prev.Full))
	line := func(share float64, degree int) (Value, bool) {
		var x, y, u []float64
		for _, p := range pts {
			if s := seconds(p.Time - prev.Full); s >= last*share && s > 0 {
				v, w := of(p)
				x, y, u = append(x, math.Log(s)), append(y, v), append(u, w)
			}
		}
		if len(x) < 3 || degree > 1 && len(x) < enoughToBend {
			return Value{}, false
		}
		f, ok := fitPoly(x, y, u, degree)
		return Value{f.at(at), f.u(at)}, ok
	}
	near, ok := line(0.5, 1)
	if !ok {
		v, u := of(end)
		return carried{Value{v, u}, 0}, true
	}
	if bent, ok := line(0.25, 2); ok && bent.U < math.Abs(bent.MM-near.MM) {
		return carried{bent, (bent.MM - near.MM) / 2 / math.Sqrt(3)}, true
	}
	if far, ok := line(0.25, 1); ok {
		return carried{near, (near.MM - far.MM) / math.Sqrt(3)}, true
	}
	return carried{near, 0}, true
}

// enoughToBend is how many readings of a step tell how its trend bends.
const enoughToBend = 20

// settlements reports how far each support went down.
func (r *run) settlements() {
	over := r.supportGauges()
	last := len(r.out.Steps) - 1
	for s := range r.h.Rig.Supports {
		v := Settlement{Support: s, Gauge: over[s]}
		if over[s] >= 0 {
			// The last step in which the gauge left readings tells the end.
			for k := last; k >= 0 && v.Value == nil; k-- {
				v.Value = r.out.Steps[k].Gauges[over[s]].Gross.Final
			}
			v.Measured = v.Value != nil
		}
		r.out.Supports = append(r.out.Supports, v)
	}
}
