package steps

import (
	"slices"
	"sort"
)

// explain classifies the clusters until it agrees with itself on which marked
// changes are in doubt: an unmarked change makes the next mark of its load say
// a false delta, which must not tell the scale of the unmarked one.
func (r *run) explain() {
	disturbances, excluded := len(r.out.Disturbances), len(r.out.Excluded)
	pending := len(r.pending)
	taken := make([]bool, len(r.events))
	for i := range r.events {
		taken[i] = r.events[i].taken
	}
	for range 4 {
		r.out.Disturbances, r.out.Excluded = r.out.Disturbances[:disturbances], r.out.Excluded[:excluded]
		r.pending, r.shifts = r.pending[:pending], nil
		for i := range r.events {
			r.events[i].taken = taken[i]
		}
		r.former, r.unmarked = r.unmarked, nil
		r.classify()
		was := r.doubtful
		r.doubtful = r.doubts()
		if slices.Equal(was, r.doubtful) || was == nil && !slices.Contains(r.doubtful, true) {
			break
		}
	}
	r.shareOut()
}

// loadEvent is a change of load, marked or not, in its place in time.
type loadEvent struct {
	at       int64
	change   int // index of the marked change, -1
	unmarked *unmarkedStep
}

// loadEvents lists the marked changes and the given unmarked ones in the order
// in which they happened.
func (r *run) loadEvents(unmarked []unmarkedStep) []loadEvent {
	var out []loadEvent
	for i, c := range r.changes {
		at := c.first
		if e := r.matchOf(i); e != nil {
			at = e.lo
		}
		out = append(out, loadEvent{at: at, change: i})
	}
	for i := range unmarked {
		out = append(out, loadEvent{at: unmarked[i].event.lo, change: -1, unmarked: &unmarked[i]})
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].at < out[b].at })
	return out
}

// doubts says of each marked change whether its delta is in doubt.
func (r *run) doubts() []bool {
	out := make([]bool, len(r.changes))
	hung := newHanging(r.before.newton)
	for _, v := range r.loadEvents(r.unmarked) {
		if v.unmarked != nil {
			hung.disturb(v.unmarked)
			continue
		}
		_, known := hung.set(r.changes[v.change])
		out[v.change] = !known
	}
	return out
}

// inDoubt says that the jumps of a change's cluster are not those of its
// delta: the delta is false, or the cluster holds another change too.
func (r *run) inDoubt(change int) bool {
	if change < len(r.doubtful) && r.doubtful[change] {
		return true
	}
	e := r.matchOf(change)
	if e == nil {
		return false
	}
	for k, c := range r.changes {
		if k != change && r.matched[k] < 0 && c.last >= e.lo && c.first <= e.hi {
			return true
		}
	}
	return false
}

// hangingBefore is what hung right before an instant, the unmarked changes
// counting that the last classification found.
func (r *run) hangingBefore(t int64) *hanging {
	hung := newHanging(r.before.newton)
	for _, v := range r.loadEvents(r.former) {
		switch {
		case v.at >= t:
			return hung
		case v.unmarked != nil:
			hung.disturb(v.unmarked)
		default:
			hung.set(r.changes[v.change])
		}
	}
	return hung
}
