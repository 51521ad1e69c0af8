package stiffness

import (
	"maps"
	"math"

	"gaugelog/config"
)

// state holds every input of the measurement model at one set of values: the
// nominal one, or one with errors drawn or shifted in.
type state struct {
	support  []float64 // mm
	given    []float64 // mm/N, compliances not fitted
	gauge    []float64 // mm
	bar      [][2]float64
	gain     []float64 // factor on what each gauge says, 1 nominally
	contact  []float64 // N/mm
	stuck    []float64 // N, extra force of a plunger in every increment
	loadFrom []float64
	loadTo   []float64
	weight   []float64 // factor on each load, 1 nominally
	gravity  float64   // factor on weighed loads, 1 nominally
	ratio    float64   // E/G where assumed
	shear    float64   // shear modulus where stated, MPa
	dims     dims
	offset   map[string][]float64 // stand -> movement by step, mm
	lean     map[[2]int]float64   // gauge and step -> what turning adds to the increment, mm
	carry    []float64            // by step: how far the trend carried forward is off, in its u
}

func (s *state) clone() *state {
	c := *s
	for _, p := range []*[]float64{&c.support, &c.given, &c.gauge, &c.gain, &c.contact, &c.stuck, &c.loadFrom, &c.loadTo, &c.weight, &c.carry} {
		*p = append([]float64(nil), *p...)
	}
	c.bar = append([][2]float64(nil), c.bar...)
	c.offset = make(map[string][]float64, len(s.offset))
	for k, v := range s.offset {
		c.offset[k] = append([]float64(nil), v...)
	}
	c.lean = maps.Clone(s.lean)
	return &c
}

// nominal is the state the rig file states.
func nominal(rig *config.Rig, sec *Section) *state {
	s := &state{gravity: 1, dims: sec.base, offset: map[string][]float64{}}
	for _, p := range rig.Supports {
		s.support = append(s.support, p.At.Value)
		c := 0.0
		if p.Compliance != nil {
			c = p.Compliance.Value
		}
		s.given = append(s.given, c)
	}
	for _, g := range rig.Gauges {
		s.gauge = append(s.gauge, g.At.Value)
		var bar [2]float64
		if len(g.Bar) == 2 {
			bar = [2]float64{g.Bar[0].Value, g.Bar[1].Value}
		}
		s.bar = append(s.bar, bar)
		s.gain = append(s.gain, 1)
		k := 0.0
		if g.Contact != nil && g.Contact.Stiffness != nil && sees(g) == "beam" {
			k = g.Contact.Stiffness.Value
		}
		s.contact = append(s.contact, k)
		s.stuck = append(s.stuck, 0)
	}
	for _, l := range rig.Loads {
		from, to := loadPlaces(l)
		s.loadFrom, s.loadTo, s.weight = append(s.loadFrom, from), append(s.loadTo, to), append(s.weight, 1)
	}
	return s
}

// nudge adds a stand's movement in step k.
func (s *state) nudge(stand string, k int, v float64) {
	for len(s.offset[stand]) <= k {
		s.offset[stand] = append(s.offset[stand], 0)
	}
	s.offset[stand][k] += v
}

// turn adds what turning about the beam's axis does to a gauge in step k.
func (s *state) turn(gauge, k int, v float64) {
	if s.lean == nil {
		s.lean = map[[2]int]float64{}
	}
	s.lean[[2]int{gauge, k}] += v
}

// moved is what has nothing to do with the beam in a row: its stand's movement
// and the error of the trend carried forward.
func (s *state) moved(stand string, o observation) float64 {
	mm := 0.0
	if by := s.offset[stand]; o.step < len(by) {
		mm = by[o.step]
	}
	mm += s.lean[[2]int{o.gauge, o.step}]
	if o.step < len(s.carry) {
		mm += s.carry[o.step] * o.carried
	}
	return mm
}

func loadPlaces(l config.Load) (from, to float64) {
	switch {
	case l.At != nil:
		return l.At.Value, l.At.Value
	case l.From != nil && l.To != nil:
		return l.From.Value, l.To.Value
	}
	return math.NaN(), math.NaN()
}

func sees(g config.Gauge) string {
	if g.Sees == "" {
		return "beam"
	}
	return g.Sees
}

// seat is the support whose seat a gauge follows: the nearest.
func seat(rig *config.Rig, at float64) int {
	best := 0
	for i, s := range rig.Supports {
		if math.Abs(s.At.Value-at) < math.Abs(rig.Supports[best].At.Value-at) {
			best = i
		}
	}
	return best
}
