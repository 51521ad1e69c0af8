package main

import (
	"math"
	"slices"
)

// This file says once more, apart from the recorder and from what
// ingest/SAMPLING.md publishes alone, which readings are stored. It looks at
// whole lists where the recorder has rings and bounds. Times are ns by the
// boot-time clock unless they are called true.

// samplingRule is a rig's sampling: all, or dense, around, per_decade, longest
// and dead_band together.
type samplingRule struct {
	all                    bool
	dense, around, longest int64
	perDecade              float64
	deadBand               float64 // mm
}

const (
	ruleLateness  = int64(5 * 60e9) // a mark may come that much later and find all in memory
	ruleMostHeld  = 8192            // readings of one gauge in memory
	ruleJumpSpan  = int64(10e9)     // a jump is farther than the dead band within this
	ruleOneBefore = 1               // or from the reading before, where they come less often
)

// takenReading is one reading as the recorder takes it.
type takenReading struct {
	gauge  int
	true   int64 // ns since 1970 UTC
	boot   int64
	mm     float64
	stored bool
}

// ruleLife is one life of the recorder: it knows nothing of an earlier one but
// its last mark.
type ruleLife struct {
	rule    samplingRule
	change  int64
	now     int64
	gauges  []ruleGauge
	history []*takenReading // of all gauges, in the order of taking
}

type ruleGauge struct {
	readings []*takenReading
	jumping  bool
	due      int64 // of the next stored reading; 0: at once
	any      bool
	lastMM   float64 // of the reading stored last
}

// take decides about one reading, and about those before it where it is a jump.
func (l *ruleLife) take(r *takenReading) {
	g := &l.gauges[r.gauge]
	interval := int64(0)
	if n := len(g.readings); n > 0 {
		interval = r.boot - g.readings[n-1].boot
	}
	l.now = max(l.now, r.boot)
	g.readings = append(g.readings, r)
	l.history = append(l.history, r)
	if l.rule.all {
		r.stored = true
		return
	}
	was := g.jumping
	if before := g.compared(); before != nil {
		g.jumping = math.Abs(r.mm-before.mm) > l.rule.deadBand
	}
	if g.jumping && !was {
		l.changed(r.boot)
	}
	if !r.stored && l.wants(g, r, interval) {
		l.store(r)
	}
}

// compared is the reading that a new one is a jump from: the oldest of the last
// ten seconds, or the one before it.
func (g *ruleGauge) compared() *takenReading {
	n := len(g.readings) - 1
	if n == 0 {
		return nil
	}
	i := n - ruleOneBefore
	for i > 0 && g.readings[n].boot-g.readings[i-1].boot <= ruleJumpSpan {
		i--
	}
	return g.readings[i]
}

// marked is a mark, seen now, that speaks of a change at an instant.
func (l *ruleLife) marked(at, now int64) {
	l.now = max(l.now, now)
	if !l.rule.all {
		l.changed(min(at, l.now))
	}
}

// changed stores what memory holds from around before the change on, and begins
// the dense spacing anew.
func (l *ruleLife) changed(at int64) {
	l.change = max(l.change, at)
	for i := range l.gauges {
		l.gauges[i].due = 0
	}
	from := at - l.rule.around
	first := len(l.history)
	for first > 0 && l.history[first-1].boot >= from-int64(60e9) {
		first--
	}
	late := slices.Clone(l.history[first:])
	slices.SortStableFunc(late, func(a, b *takenReading) int { return int(a.boot - b.boot) })
	for _, r := range late {
		if !r.stored && r.boot >= from && l.held(r) {
			l.store(r)
		}
	}
}

// held tells whether memory still has the reading.
func (l *ruleLife) held(r *takenReading) bool {
	of := l.gauges[r.gauge].readings
	newest := of[len(of)-1]
	if newest.boot-r.boot > l.rule.around+ruleLateness {
		return false
	}
	return len(of) <= ruleMostHeld || r.boot >= of[len(of)-ruleMostHeld].boot
}

func (l *ruleLife) store(r *takenReading) {
	r.stored = true
	g := &l.gauges[r.gauge]
	g.any, g.lastMM = true, r.mm
}

// wants tells whether the reading is stored for its own sake.
func (l *ruleLife) wants(g *ruleGauge, r *takenReading, interval int64) bool {
	spacing := l.spacing(r.boot)
	if !g.any || math.Abs(r.mm-g.lastMM) > l.rule.deadBand {
		g.due = max(g.due, r.boot+spacing)
		return true
	}
	if r.boot < g.due-min(interval, spacing)/2 {
		return false // another one will be nearer
	}
	if g.due == 0 || r.boot-g.due > spacing {
		g.due = r.boot
	}
	g.due += spacing
	return true
}

// spacing is dense for a time of around, then a share of the time since the
// change, so that there are per_decade readings in each decade, at most longest.
func (l *ruleLife) spacing(at int64) int64 {
	since := at - l.change
	if since <= l.rule.around {
		return l.rule.dense
	}
	share := math.Pow(10, 1/l.rule.perDecade) - 1
	return min(max(l.rule.dense, int64(share*float64(since))), max(l.rule.longest, l.rule.dense))
}
