package stiffness

import (
	"math"

	"gaugelog/analysis/beam"

	"gonum.org/v1/gonum/mat"
)

// GaugeStiffness is load over sag at one gauge, and the moduli by EN 408
// where the set-up is that of the standard.
type GaugeStiffness struct {
	Gauge string
	// Ratio is the total load's increments over the gauge's net sag
	// increments, N/mm, from the steps of the pattern of loading that changed
	// the load most; nil where the sag is nothing beside its uncertainty.
	Ratio *Quantity
	// Local is EN 408's local modulus (clause 9): from a bar within the two
	// loads, so free of shear. Global is its global modulus (clause 10) with
	// G taken as infinite, so it includes shear. MPa; nil elsewhere.
	Local, Global *Quantity
}

// StandardModulus is a modulus by a standard's own formula.
type StandardModulus struct {
	Standard string
	Gauge    string
	Includes string // what the figure contains
	Modulus  Quantity
}

// EN408Local is EN 408 clause 9 (two equal loads at a from the supports, F
// their total, w the sag in mm of the middle against the ends of gauge length
// l1): a l1^2 dF / (16 I dw), MPa.
func EN408Local(a, l1, secondMoment, dF, dw float64) float64 {
	return a * l1 * l1 * dF / (16 * secondMoment * dw)
}

// EN408Global is EN 408 clause 10 for a rectangle b by h (mm), shear modulus g
// in MPa (+Inf: no shear term): (3 a l^2 - 4 a^3) / (2 b h^3 (2 dw/dF -
// 6 a/(5 G b h))).
func EN408Global(a, l, b, h, dF, dw, g float64) float64 {
	return (3*a*l*l - 4*a*a*a) / (2 * b * h * h * h * (2*dw/dF - 6*a/(5*g*b*h)))
}

// D198TwoPoint is ASTM D198's apparent modulus for two equal loads at a from
// the supports, p their total: p a (3 L^2 - 4 a^2) / (4 b h^3 D).
func D198TwoPoint(a, l, b, h, p, sag float64) float64 {
	return p * a * (3*l*l - 4*a*a) / (4 * b * h * h * h * sag)
}

// D198ShearFree is ASTM D198's for the load span: 3 p a Lb^2 / (4 b h^3 D),
// D over the length lb between the loads.
func D198ShearFree(a, lb, b, h, p, sag float64) float64 {
	return 3 * p * a * lb * lb / (4 * b * h * h * h * sag)
}

// ThreePoint is the modulus of ASTM D790, D198 (centre point) and ISO 178 for
// a rectangle: L^3 m / (4 b h^3), m the slope of load over sag in N/mm.
func ThreePoint(l, b, h, slope float64) float64 {
	return l * l * l * slope / (4 * b * h * h * h)
}

// D790LargeSpan is ASTM D790's factor on the stress 3 P L / (2 b d^2) of a
// three-point test that sags by D more than a tenth of its span L:
// 1 + 6 (D/L)^2 - 4 (d/L)(D/L), d the depth (polynomial from memory).
func D790LargeSpan(sag, d, l float64) float64 {
	return 1 + 6*(sag/l)*(sag/l) - 4*(d/l)*(sag/l)
}

// netSag is a gauge's sag net of support movement, summed over steps, with
// its uncertainty: a linear form on all readings, since they give the
// supports' movement too.
func (f *fitted) netSag(gauge int, steps map[int]bool) (value, u float64) {
	l, own := make([]float64, len(f.m.rows)), make([]float64, len(f.m.rows))
	stated := f.statedMovement()
	for r, o := range f.m.rows {
		if o.gauge != gauge || !steps[o.step] {
			continue
		}
		l[r]++
		own[r]++
		value += o.mm - stated[r]
		for j := f.m.firstYield(); j < len(f.theta); j++ {
			value -= f.x.At(r, j) * f.theta[j]
			for q := range l {
				l[q] -= f.x.At(r, j) * f.gain.At(j, q)
			}
		}
	}
	v := mat.NewVecDense(len(l), l)
	variance := mat.Inner(v, f.cov, v)
	for c, cs := range f.causes {
		// What is assumed of the shear is in no reading; it counts through the
		// supports' movement alone.
		if cs.shear {
			all := mat.Dot(v, f.jac.ColView(c))
			supports := all - mat.Dot(mat.NewVecDense(len(own), own), f.jac.ColView(c))
			variance += cs.u * cs.u * (supports*supports - all*all)
		}
	}
	return value, math.Sqrt(math.Max(0, variance))
}

// statedMovement is what supports with a stated compliance and no gauge do to
// each increment.
func (f *fitted) statedMovement() []float64 {
	out := make([]float64, len(f.m.rows))
	bare := f.st.clone()
	for i := range bare.given {
		bare.given[i] = 0
	}
	with, _, err := f.m.evaluate(f.st, f.theta)
	if err != nil {
		return out
	}
	without, _, err := f.m.evaluate(bare, f.theta)
	if err != nil {
		return out
	}
	for r := range out {
		out[r] = with[r] - without[r]
	}
	return out
}

// pattern finds the steps whose changes of load are in one proportion and
// together change the load most, and their total in N.
func (m *model) pattern(read func(k int) bool) (steps map[int]bool, total float64) {
	for k := range m.changes {
		if !read(k) {
			continue
		}
		group, sum := map[int]bool{}, 0.0
		for j := range m.changes {
			if s := m.totalOf(j); read(j) && m.alike(k, j) {
				group[j] = true
				sum += s
			}
		}
		if math.Abs(sum) > math.Abs(total) {
			steps, total = group, sum
		}
	}
	return steps, total
}

func (m *model) totalOf(k int) float64 {
	sum := 0.0
	for _, c := range m.changes[k] {
		sum += c.n
	}
	return sum
}

func (m *model) each(k int) []float64 {
	out := make([]float64, len(m.rig.Loads))
	for _, c := range m.changes[k] {
		out[c.load] += c.n
	}
	return out
}

// alike compares two changes' directions, within a thousandth; loading and
// unloading are not alike.
func (m *model) alike(k, j int) bool {
	a, b := m.each(k), m.each(j)
	var ab, aa, bb float64
	for i := range a {
		ab += a[i] * b[i]
		aa += a[i] * a[i]
		bb += b[i] * b[i]
	}
	return aa > 0 && bb > 0 && ab/math.Sqrt(aa*bb) > 1-5e-7
}

func (e *Estimate) gauges() {
	f := e.fit
	m := f.m
	for g, gauge := range m.rig.Gauges {
		if !m.reads(g) || sees(gauge) == "seat" {
			continue
		}
		read := func(k int) bool {
			for _, o := range m.rows {
				if o.gauge == g && o.step == k {
					return true
				}
			}
			return false
		}
		out := GaugeStiffness{Gauge: gauge.Name}
		steps, total := m.pattern(read)
		net, u := f.netSag(g, steps)
		if math.Abs(net) > 3*u && total != 0 {
			q := simple(total/net, math.Abs(total/net)*u/math.Abs(net))
			out.Ratio = &q
			e.standards(g, &out, total, net, u/math.Abs(net), steps)
		}
		e.StiffnessAt = append(e.StiffnessAt, out)
	}
	e.apparent()
}

func simple(value, u float64) Quantity {
	q, _ := combine(value, []Line{{U: u, Sensitivity: 1}})
	return q
}

// apparent is the modulus that bending alone would need for the creep gauge,
// from all changes that added load: taking it off again would cancel them.
func (e *Estimate) apparent() {
	f := e.fit
	m := f.m
	g := m.creepGauge()
	if g < 0 {
		return
	}
	steps := map[int]bool{}
	bent := 0.0
	none := make([]float64, len(m.rig.Supports))
	for _, o := range m.rows {
		if o.gauge != g || m.totalOf(o.step) <= 0 {
			continue
		}
		steps[o.step] = true
		bare := *m
		bare.springs = make([][]float64, len(m.changes))
		s, err := m.beam(f.st, 1, math.Inf(1), none).Solve(bare.loads(f.st, o.step))
		if err != nil {
			return
		}
		bent += m.look(f.st, g, s, func(int) float64 { return 0 })
	}
	net, u := f.netSag(g, steps)
	if math.Abs(net) <= 3*u || bent/net <= 0 {
		return
	}
	i := m.sec.SecondMoment
	v := bent / (net * i.Value)
	q := simple(v, v*math.Hypot(u/net, i.U/i.Value))
	e.ApparentModulus, e.ApparentGauge = &q, m.rig.Gauges[g].Name
}

// creepGauge is the gauge named in the rig file, else the beam gauge that
// sagged most as load came on; -1 if it was not read.
func (m *model) creepGauge() int {
	best, sag := -1, 0.0
	sum := make([]float64, len(m.rig.Gauges))
	for _, o := range m.rows {
		if m.totalOf(o.step) > 0 {
			sum[o.gauge] += o.mm
		}
	}
	for g, gauge := range m.rig.Gauges {
		if !m.reads(g) || sees(gauge) != "beam" {
			continue
		}
		if gauge.Name == m.rig.Read.CreepGauge {
			return g
		}
		if m.rig.Read.CreepGauge == "" && len(gauge.Bar) == 0 && sum[g] > sag {
			best, sag = g, sum[g]
		}
	}
	return best
}

// standards fills the moduli of standards whose set-up this is: a rectangle
// on two pins under one centre load or two equal loads placed alike.
func (e *Estimate) standards(g int, out *GaugeStiffness, total, net, rel float64, steps map[int]bool) {
	m := e.fit.m
	s := m.rig.Supports
	if !m.determinate || len(s) != 2 || m.rig.Specimen.Section.Shape != "rectangle" || total <= 0 {
		return
	}
	left, right := math.Min(s[0].At.Value, s[1].At.Value), math.Max(s[0].At.Value, s[1].At.Value)
	l, x := right-left, m.rig.Gauges[g].At.Value
	b, h := m.sec.base.width, m.sec.base.depth
	rel = math.Hypot(rel, m.sec.SecondMoment.U/m.sec.SecondMoment.Value)
	note := func(standard, includes string, v float64) *Quantity {
		q := simple(v, v*rel)
		e.Standards = append(e.Standards, StandardModulus{standard, m.rig.Gauges[g].Name, includes, q})
		return &q
	}
	near := func(a, b float64) bool { return math.Abs(a-b) <= 0.005*l }
	centre := near(x, (left+right)/2)
	a, two := m.twoPoint(steps, left, right)
	bar := m.rig.Gauges[g].Bar
	switch {
	case two && len(bar) == 2 && centre:
		from, to := math.Min(bar[0].Value, bar[1].Value), math.Max(bar[0].Value, bar[1].Value)
		if from >= left+a && to <= right-a && near((from+to)/2, x) {
			out.Local = note("EN 408 local", "bending between the loads; free of shear and supports", EN408Local(a, to-from, m.sec.SecondMoment.Value, total, net))
			note("ASTM D198 shear-free", "bending between the loads; free of shear and supports", D198ShearFree(a, to-from, b, h, total, net))
		}
	case two && len(bar) == 0 && centre:
		out.Global = note("EN 408 global", "bending and shear (G taken as infinite); net of supports", EN408Global(a, l, b, h, total, net, math.Inf(1)))
		note("ASTM D198 apparent", "bending and shear; net of supports", D198TwoPoint(a, l, b, h, total, net))
	case !two && len(bar) == 0 && centre && m.onePoint(steps, (left+right)/2, 0.005*l):
		note("ASTM D790 / ISO 178 / ASTM D198 centre point", "bending and shear; net of supports", ThreePoint(l, b, h, total/net))
	}
}

// twoPoint reports the distance of two equal point loads from their supports.
func (m *model) twoPoint(steps map[int]bool, left, right float64) (a float64, ok bool) {
	active := m.active(steps)
	if len(active) != 2 {
		return 0, false
	}
	one, two := active[0], active[1]
	if one.From > two.From {
		one, two = two, one
	}
	p, q := one.From-left, right-two.From
	ok = one.From == one.To && two.From == two.To && p > 0 && q > 0 &&
		math.Abs(p-q) <= 0.005*(right-left) && math.Abs(one.Force-two.Force) <= 0.01*math.Abs(one.Force)
	return (p + q) / 2, ok
}

func (m *model) onePoint(steps map[int]bool, at, within float64) bool {
	active := m.active(steps)
	return len(active) == 1 && active[0].From == active[0].To && math.Abs(active[0].From-at) <= within
}

// active are the loads that changed in the steps, with their totals.
func (m *model) active(steps map[int]bool) []beam.Load {
	sum := make([]float64, len(m.rig.Loads))
	for k := range m.changes {
		if steps[k] {
			for i, n := range m.each(k) {
				sum[i] += n
			}
		}
	}
	var out []beam.Load
	for i, n := range sum {
		if n != 0 {
			from, to := loadPlaces(m.rig.Loads[i])
			out = append(out, beam.Load{Name: m.rig.Loads[i].Name, From: from, To: to, Force: n})
		}
	}
	return out
}
