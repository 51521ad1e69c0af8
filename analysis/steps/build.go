package steps

import (
	"fmt"
	"math"
	"sort"
)

// part is what a step was built from.
type part struct {
	change int // index of the marked change, -1
	event  *cluster
	at     timing
	un     *unmarkedStep
}

// buildSteps tiles the run with steps from the marks, where the readings say
// when, and from the load changes nobody marked.
func (r *run) buildSteps() {
	r.parts = []part{{change: -1}}
	for i, c := range r.changes {
		p := part{change: i, event: r.matchOf(i)}
		switch {
		case p.event == nil:
			p.at = timing{start: c.first, full: c.last, ramp: seconds(c.last - c.first)}
			p.at.u = hypot(r.reach(i)) / math.Sqrt(3)
		case p.event.weak:
			p.at = r.coarse(p.event, c.mark())
		default:
			p.at = r.time(p.event, c.mark())
		}
		r.ruleStep(c.name, &p.at)
		if p.at.start > r.h.Last {
			r.warn("mark-after-last-reading", -1, c.first, fmt.Sprintf("step %s was marked after the last reading; there is nothing to say of it", c.name))
			continue
		}
		r.parts = append(r.parts, p)
	}
	for i := range r.unmarked {
		r.parts = append(r.parts, part{change: -1, event: r.unmarked[i].event, at: r.unmarked[i].at, un: &r.unmarked[i]})
	}
	sort.SliceStable(r.parts[1:], func(a, b int) bool { return r.parts[1+a].at.start < r.parts[1+b].at.start })
	unnamed := 0
	for i := range r.parts {
		if p := &r.parts[i]; p.un != nil {
			unnamed++
			r.ruleStep(unmarkedName(unnamed), &p.at)
		}
	}
	r.fillSteps()
	r.chooseBaseline()
}

func unmarkedName(n int) string { return fmt.Sprintf("unmarked-%d", n) }

// ruleStep applies what a person decided about a step's instants. Nobody
// states how well that person knows them.
func (r *run) ruleStep(name string, t *timing) {
	for i := range r.rules {
		u := &r.rules[i]
		if u.what != "step" || u.name != name {
			continue
		}
		switch u.field {
		case "found":
			t.start, t.u, t.ruled, u.used = u.instant, 0, true, true
		case "full":
			t.full, u.used = u.instant, true
		}
		t.ramp = max(0, seconds(t.full-t.start))
		t.full = max(t.full, t.start)
	}
}

// fillSteps makes the steps of the parts, with what hangs in each.
func (r *run) fillSteps() {
	hung := newHanging(r.before.newton)
	kg := cloneMap(r.before.kilogram)
	unnamed := 0
	for k, p := range r.parts {
		s := Step{From: r.h.First, To: r.h.Last, DeltaKnown: true, Gauges: make([]GaugeFigures, len(r.gauges))}
		var delta []float64
		switch {
		case k == 0:
			s.Name = r.planName(0)
			if r.before.name != "" {
				s.Name = r.before.name
			}
		case p.un != nil:
			unnamed++
			s.Name = unmarkedName(unnamed)
			s.Unmarked, s.DeltaKnown = true, false
			s.Response = truth(true)
			delta = hung.disturb(p.un)
			for j, l := range r.h.Rig.Loads {
				if !hung.known[j] {
					delete(kg, l.Name)
				}
			}
			r.warn("unmarked-step", -1, p.at.start, fmt.Sprintf("the load changed %sand nobody marked it%s: confirm what happened, and mark it with --when (%s)", p.un.estimate(), hung.gone(p.un), s.Name))
		default:
			c := r.changes[p.change]
			s.Name, s.Marked = c.name, c.first
			delta, s.DeltaKnown = hung.set(c)
			for j, l := range r.h.Rig.Loads {
				if v, ok := c.kilogram[l.Name]; ok && hung.known[j] {
					kg[l.Name] = v
				} else {
					delete(kg, l.Name)
				}
			}
			s.Response = truth(p.event != nil)
			if p.event == nil && r.beside(c) {
				s.Response = nil
			}
			r.ruleResponse(&s)
		}
		if k > 0 {
			r.openStep(k, &s, delta)
		}
		s.Kilogram, s.LoadsKnown = cloneMap(kg), hung.allKnown()
		s.Loads = map[string]float64{}
		for j, l := range r.h.Rig.Loads {
			if hung.known[j] || hung.estimated[j] {
				s.Loads[l.Name] = hung.newton[j]
			}
		}
		r.out.Steps = append(r.out.Steps, s)
	}
}

// openStep sets the instants of a step from its part, ends the former step
// there and lists the change of load.
func (r *run) openStep(k int, s *Step, delta []float64) {
	p, former := r.parts[k], &r.out.Steps[k-1]
	s.From, s.Full = max(p.at.start, former.From), max(p.at.full, former.From)
	former.To = s.From
	s.RampS, s.RingingS, s.RingingMM = p.at.ramp, p.at.ringing, p.at.swingMM
	if p.event != nil || p.at.ruled {
		s.Found, s.StartU = p.at.start, p.at.u
		if s.Marked != 0 {
			s.OffsetS = seconds(s.Marked - s.Found)
		}
	}
	r.out.Loads = append(r.out.Loads, LoadChange{Step: k, Full: s.Full, RampS: s.RampS, Delta: delta})
}

func truth(b bool) *bool { return &b }

func (r *run) ruleResponse(s *Step) {
	for i := range r.rules {
		u := &r.rules[i]
		if u.what == "step" && u.name == s.Name && u.field == "response" {
			s.Response, u.used = truth(u.value == "true"), true
		}
	}
}

// chooseBaseline picks the step with the least load before the first rise,
// the last such where several are alike. A step that the gauges answered and
// that is no proven decrease is a rise, for all anybody knows; a step whose
// loads nobody knows is never the baseline.
func (r *run) chooseBaseline() {
	best, least := 0, math.Inf(1)
	former := math.Inf(-1)
	for k, s := range r.out.Steps {
		sum := 0.0
		for _, l := range r.h.Rig.Loads {
			sum += s.Loads[l.Name]
		}
		if k > 0 {
			fell := s.DeltaKnown && sum < former-1e-9
			answered := s.Response != nil && *s.Response
			if !s.LoadsKnown || sum > former+1e-9 || answered && !fell {
				break
			}
		}
		if sum <= least {
			best, least = k, sum
		}
		former = sum
	}
	r.out.Baseline = best
	if least > 0 {
		r.warn("baseline-loaded", -1, r.out.Steps[best].From, fmt.Sprintf("%.4g\u202fN hung on the beam at the baseline (step %s): sags count from there", least, r.out.Steps[best].Name))
	}
}

// beside says that a change without a cluster of its own was marked where
// another one's readings cannot tell the two apart.
func (r *run) beside(c change) bool {
	tol := nanos(r.spacing(c.first))
	for _, j := range r.matched {
		if j >= 0 && c.last >= r.events[j].lo-tol && c.first <= r.events[j].hi+tol {
			return true
		}
	}
	return false
}
