package steps

import (
	"fmt"
	"math"
	"strings"
)

// lateReadings says of which steps no initial sag is stated because the gauges
// were first read too late after full load, or the step was over before.
func (r *run) lateReadings() {
	var names []string
	first, last := math.Inf(1), math.Inf(-1)
	for k, s := range r.out.Steps {
		if s.Response == nil || !*s.Response {
			continue
		}
		soonest := math.Inf(1)
		for g := range r.gauges {
			if !r.seesBeam(g) {
				continue
			}
			if s.Gauges[g].Gross.Initial != nil {
				soonest = math.Inf(-1)
				break
			}
			for _, p := range r.out.Tracks[g].Points {
				if p.Step == k && p.Time >= s.Full {
					soonest = min(soonest, seconds(p.Time-s.Full))
					break
				}
			}
		}
		if math.IsInf(soonest, 0) {
			continue
		}
		names = append(names, s.Name)
		first, last = min(first, soonest), max(last, soonest)
	}
	if len(names) == 0 {
		return
	}
	when := lasted(first)
	if last > first {
		when += " to " + lasted(last)
	}
	r.warn("first-reading-late", -1, 0, fmt.Sprintf("no initial sag of %s: it is that at %s after full load (read.initial_after), and the first readings came %s after it; a later time can be set in the amendments, sooner readings are better", strings.Join(names, ", "), lasted(r.initialAfter()), when))
}
