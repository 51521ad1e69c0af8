package desk

import (
	"context"
	"errors"
	"slices"
	"time"

	"gaugelog/ingest/rollup"
)

// Figures of the baseline that the page counts sag from: what the gauges
// showed before the first load, and far enough before it for a late mark.
const (
	baselineFrom = 10 * time.Minute
	baselineTo   = 2 * time.Minute
)

// baseline is what the gauges showed before the first load.
type baseline struct {
	before int64 // the first load's mark, ns; 0: none was entered
	values []float64
	known  []bool
	asked  bool // it was looked for in the folder
	reread bool // it must be read
	since  bool // the readings since the last load must be read, all of them
	busy   bool
}

// bookResult is what a pass over the folder brought.
type bookResult struct {
	whole *rollup.Book // everything before the start; nil from a later pass
	since *rollup.Book // what came since its origin
	base  baseline
	err   error
}

// rebuild brings back what was recorded before this process began.
func (d *Desk) rebuild(ctx context.Context, origin int64) {
	book, err := d.past.Book(ctx, d.o.Start.Wall, origin)
	select {
	case d.books <- bookResult{whole: book, err: err}:
	case <-ctx.Done():
	}
}

// summariseEvery is how often segments that were closed meanwhile get their
// summaries, for the next start.
const summariseEvery = 10 * time.Minute

// summarise makes summaries until the context ends.
func (d *Desk) summarise(ctx context.Context) {
	ticker := time.NewTicker(summariseEvery)
	defer ticker.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case <-ticker.C:
			if err := d.past.Summarise(ctx); err != nil && ctx.Err() == nil {
				d.o.Log.Warn("closed segments were not summarised", "error", err)
			}
		}
	}
}

// merge takes what a pass over the folder brought.
func (d *Desk) merge(ctx context.Context, r bookResult) {
	if r.err != nil && ctx.Err() == nil {
		d.o.Log.Warn("what was recorded earlier cannot be shown whole", "error", r.err)
	}
	if r.whole != nil {
		d.rebuilding = false
		d.setLoads()
		// Its Since bins count from another load where one was marked meanwhile.
		d.baseline.since = d.baseline.since || d.book.Origin != 0 && r.whole.Origin != d.book.Origin
		if err := d.book.Merge(r.whole); err != nil {
			panic("desk: " + err.Error()) // both have the channels of the rig
		}
	} else {
		d.baseline.busy = false
		if r.since != nil {
			d.book.ReplaceSince(r.since)
		}
		if r.base.asked && r.base.before == d.baseline.before {
			d.baseline.values, d.baseline.known, d.baseline.asked = r.base.values, r.base.known, true
		}
	}
	d.curves = nil
	d.readAgain(ctx)
}

// readAgain starts a pass over the folder where one is due.
func (d *Desk) readAgain(ctx context.Context) {
	if !d.baseline.reread && !d.baseline.since || d.baseline.busy || d.rebuilding {
		return
	}
	since := d.baseline.since
	d.baseline.reread, d.baseline.since, d.baseline.busy = false, false, true
	origin, before := d.book.Origin, d.baseline.before
	d.background.Go(func() { d.reread(ctx, origin, before, since) })
}

// reread brings the readings since an origin, and the baseline before the
// first load, from the folder.
func (d *Desk) reread(ctx context.Context, origin, before int64, since bool) {
	out := bookResult{base: baseline{before: before, asked: true}}
	now := time.Now().UnixNano()
	if since && origin != 0 {
		out.since, out.err = d.past.Book(ctx, now+1, origin)
	}
	var err error
	out.base.values, out.base.known, err = d.readBaseline(ctx, before, now)
	out.err = errors.Join(out.err, err)
	select {
	case d.books <- out:
	case <-ctx.Done():
	}
}

// readBaseline takes the mean indication of each gauge in the minutes before
// the first load; where there is none, its first reading of the run.
func (d *Desk) readBaseline(ctx context.Context, before, now int64) ([]float64, []bool, error) {
	n := len(d.o.Rig.Gauges)
	values, known := make([]float64, n), make([]bool, n)
	if before != 0 {
		count := make([]int64, n)
		err := d.past.Readings(ctx, before-int64(baselineFrom), before-int64(baselineTo), func(channel int, _ int64, v float64) {
			if channel < n {
				values[channel], count[channel] = values[channel]+v, count[channel]+1
			}
		})
		if err != nil {
			return values, known, err
		}
		for i := range n {
			if known[i] = count[i] > 0; known[i] {
				values[i] /= float64(count[i])
			}
		}
	}
	return values, known, nil
}

// baselineOf is what gauge i showed before the first load, or the first that
// is known of it; false where nothing is.
func (d *Desk) baselineOf(i int) (float64, bool) {
	if i < len(d.baseline.known) && d.baseline.known[i] {
		return d.baseline.values[i], true
	}
	bins := d.book.Series[i].Whole.Bins
	if k := slices.IndexFunc(bins, func(b rollup.Bin) bool { return b.N > 0 }); k >= 0 {
		return bins[k].Mean(), true
	}
	return 0, false
}
