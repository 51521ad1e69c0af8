package creep

import (
	"fmt"
	"math"
)

// A load is placed between two readings, and nothing says when. A second's
// error bends the first minutes of a power law by more than the gauge's noise,
// so the instants of changes are unknowns of their own, near the ones found.

// mostInstants and mostForInstants bound the changes of load and the bins for
// which every instant is an unknown: beyond, only those that begin and end the
// creep step are.
const (
	mostInstants    = 6
	mostForInstants = 1500
)

// layInstants gives the instants of changes a column each in every series: the
// difference the law makes for a change a little later and a little earlier.
func (s *system) layInstants() {
	for i := range s.parts {
		p := &s.parts[i]
		few := len(p.Changes) <= mostInstants && len(p.TimeH) <= mostForInstants
		for c, ch := range p.Changes {
			// A reading during the change would not go linearly with its instant.
			h := ch.U / 4
			if !(h > 0) || ch.Newton == 0 || !few && !s.in.bounds(ch) || p.during(ch, h) {
				continue
			}
			later, earlier := ch, ch
			later.AtH, later.Newton = ch.AtH+h, ch.Newton/(2*h)
			earlier.AtH, earlier.Newton = ch.AtH-h, -ch.Newton/(2*h)
			s.add(i, nuisance{name: fmt.Sprintf("instant of change %d on %s", c+1, p.Name), unit: "h", kind: kindInstant,
				prior: &Knowledge{U: ch.U}, load: []Change{later, earlier}})
		}
	}
}

// bounds reports whether a change begins the creep step or ends it.
func (in *Input) bounds(c Change) bool {
	const near = 1e-3 // h
	return math.Abs(c.AtH+c.RampH-in.FullH) < near || math.Abs(c.AtH-in.EndH) < near
}

// during reports whether a bin lies within h of a change or in its ramp.
func (s *Series) during(c Change, h float64) bool {
	for _, t := range s.TimeH {
		if t > c.AtH-h && t < c.AtH+c.RampH+h {
			return true
		}
	}
	return false
}
