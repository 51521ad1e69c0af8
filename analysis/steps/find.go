package steps

import (
	"errors"
	"fmt"
	"runtime"

	"gaugelog/analysis/history"

	"golang.org/x/sync/errgroup"
)

// Find says what happened in a run. It fails only where the run cannot be
// read back or holds no readings at all; everything short of that is a
// warning, and what can still be computed is.
func Find(h *history.History, opt Options) (*Findings, error) {
	if h.Readings == 0 {
		return nil, errors.New("the run holds no readings: was the recording started, and do the gauges' names in readings/ match the rig file?")
	}
	if opt.Influence != nil {
		if len(opt.Influence) != len(h.Rig.Gauges) {
			return nil, fmt.Errorf("influence of %d gauges given, the rig has %d", len(opt.Influence), len(h.Rig.Gauges))
		}
	}
	if opt.Gravity == 0 {
		opt.Gravity = standardGravity
	}
	r := &run{h: h, opt: opt, out: &Findings{}}
	r.gauges = make([]gauge, len(h.Rig.Gauges))
	r.eachGauge(func(i int) { r.gauges[i] = newGauge(h, i) })
	for i := range r.gauges {
		if len(r.gauges[i].seq) == 0 {
			r.warn("gauge-without-readings", i, 0, fmt.Sprintf("gauge %s left no reading", r.name(i)))
		}
	}
	r.decide()
	r.before = r.readMarks()
	if err := r.happenings(); err != nil {
		return nil, err
	}
	r.chooseChord()
	r.buildSteps()
	r.forget()
	r.lasting()
	r.slowSettlements()
	if err := r.tracks(); err != nil {
		return nil, err
	}
	r.figures()
	r.lateReadings()
	r.settlements()
	r.finish()
	r.tooFew()
	return r.out, nil
}

// eachGauge does what concerns one gauge alone for all of them, side by side,
// and waits.
func (r *run) eachGauge(do func(i int)) {
	var all errgroup.Group
	all.SetLimit(runtime.GOMAXPROCS(0))
	for i := range r.gauges {
		all.Go(func() error { do(i); return nil })
	}
	_ = all.Wait() // none of them fails
}

// tooFew says so where no gauge left more than one reading, and silences what
// else would be said: it all follows from that.
func (r *run) tooFew() {
	for i := range r.gauges {
		n := 0
		for _, p := range r.gauges[i].seq {
			n += p.n
		}
		if n > 1 {
			return
		}
	}
	r.out.TooFew, r.out.Warnings = true, nil
	r.warn("too-few-readings", -1, r.h.First, "no gauge left more than one reading: there is no sag, no stiffness and no creep to state; record on, or check that the folder is whole")
}

// happenings finds the clusters and explains them. A unit key that was pressed
// changes the very scale of a gauge's readings, so it starts over then.
func (r *run) happenings() error {
	for range 6 {
		r.hot, r.events, r.matched = nil, nil, nil
		r.out.Disturbances = nil
		r.findHot()
		if err := r.scan(); err != nil {
			return err
		}
		if r.unitKeys() {
			continue
		}
		r.acts()
		r.matchChanges()
		r.partRulings()
		r.findStuck()
		r.weakResponses()
		r.explain()
		return nil
	}
	return nil
}
