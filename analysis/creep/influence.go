package creep

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/floats"
)

// layLoads gives every load its own influence on every gauge, near the one
// expected. In the creep gauge the creep step's pattern keeps its effect, for
// the law is told in terms of it; there one load is the others' counterweight.
func (s *system) layLoads() {
	for i := range s.parts {
		p := &s.parts[i]
		if !(p.PartU > 0) || len(p.Parts) == 0 {
			continue
		}
		loads := len(p.Parts[0])
		pattern := make([]float64, loads)
		weight := -1
		for l := range loads {
			for c, ch := range p.Changes {
				if ch.AtH <= s.in.FullH+1e-9 {
					pattern[l] += p.Parts[c][l]
				}
			}
			if weight < 0 || math.Abs(pattern[l]) > math.Abs(pattern[weight]) {
				weight = l
			}
		}
		for l := range loads {
			if i == 0 && l == weight {
				continue
			}
			var changes []Change
			felt := false
			for c, ch := range p.Changes {
				n := p.Parts[c][l]
				if i == 0 && pattern[weight] != 0 {
					n -= pattern[l] / pattern[weight] * p.Parts[c][weight]
				}
				felt = felt || math.Abs(n) > 1e-9*math.Abs(ch.Newton)
				changes = append(changes, Change{AtH: ch.AtH, RampH: ch.RampH, Newton: n})
			}
			if felt {
				s.add(i, nuisance{name: fmt.Sprintf("influence of load %d on %s", l+1, p.Name), unit: "1", kind: kindLoad,
					prior: &Knowledge{U: p.PartU}, load: changes})
			}
		}
	}
	s.holdLaw(append([]float64{s.stiffnessGuess()}, make([]float64, len(s.fam.names)-1)...), (s.fam.lower+s.fam.upper)/2)
}

// stiffnessGuess is the creep gauge's sag per newton by least squares.
func (s *system) stiffnessGuess() float64 {
	p := &s.parts[0]
	var up, down float64
	for i, t := range p.TimeH {
		n := 0.0
		for _, c := range p.Changes {
			if t >= c.AtH+c.RampH {
				n += c.Newton
			}
		}
		up, down = up+n*p.SagMM[i], down+n*n
	}
	if down == 0 {
		return 0
	}
	return up / down
}

// holdLaw fixes the columns of the loads' own influence and of the changes'
// instants to a law: they are its response, linear in small deviations.
func (s *system) holdLaw(linear []float64, shape float64) {
	for i := range s.parts {
		for j := range s.parts[i].extra {
			n := &s.parts[i].extra[j]
			if n.load == nil {
				continue
			}
			value, _ := s.fam.columns(s.parts[i].TimeH, n.load, shape)
			n.fixed = make([]float64, len(s.parts[i].TimeH))
			for k, c := range linear {
				floats.AddScaled(n.fixed, c, value[k])
			}
		}
	}
}
