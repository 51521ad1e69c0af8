package desk

import (
	"context"
	"errors"
	"io"
	"math"
	"slices"
	"time"

	"gaugelog/ingest/rollup"
	"gaugelog/ingest/segment"
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
	anew  bool         // whole was read from the readings: nothing was stored
	since *rollup.Book // what came since its origin
	base  baseline
	err   error
}

// rebuild brings back what was recorded before this process began: the stored
// book, and from the folder what is newer than it.
func (d *Desk) rebuild(ctx context.Context, origin int64) {
	names := seriesNames(d.o.Rig)
	book := d.loadBook(names)
	found := book != nil
	if !found {
		book = rollup.NewBook(names...)
		book.SetOrigin(origin) // one pass brings everything
	}
	err := d.readFolder(ctx, book, book.Until+1, d.o.Start.Wall-1)
	select {
	case d.books <- bookResult{whole: book, anew: !found, err: err}:
	case <-ctx.Done():
	}
}

// readFolder adds the folder's readings between two instants, both inclusive.
func (d *Desk) readFolder(ctx context.Context, book *rollup.Book, from, to int64) error {
	if to < from {
		return nil
	}
	folder, err := segment.OpenFolder(d.o.FS)
	if err != nil {
		return err
	}
	// One worker: the recording beside it goes first.
	r := folder.Read(segment.ReadOptions{Workers: 1, From: from, To: to, Gauges: book.Names()[:len(d.o.Rig.Gauges)]})
	defer r.Close()
	for ctx.Err() == nil {
		b, err := r.Next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		for i, g := range b.Gauge {
			if int(g) < len(d.o.Rig.Gauges) {
				book.Add(int(g), b.Time[i], float64(b.Micro[i])/1e6)
			}
		}
		for i := range b.Others {
			d.addRecord(book, &b.Others[i])
		}
	}
	return ctx.Err()
}

func (d *Desk) addRecord(book *rollup.Book, r *segment.Record) {
	d.each(r, func(series int, v float64) { book.Add(series, r.Time, v) })
}

// each hands over what a record says of the desk's channels.
func (d *Desk) each(r *segment.Record, take func(series int, v float64)) {
	switch r.Kind {
	case segment.Indication:
		if i, ok := d.channels["gauge "+r.Name]; ok {
			take(i, r.MM)
		}
	case segment.Ambient:
		i, ok := d.channels["probe "+r.Name]
		if !ok || r.Point == nil {
			return
		}
		for k, field := range []string{"celsius", "humidity_percent"} {
			if v, ok := r.Point.Value(field); ok {
				if f, ok := v.(float64); ok {
					take(i+k, f)
				}
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
		if r.anew {
			d.stored = time.Unix(0, 0) // due at once: the next start shall not read everything again
		}
		if !r.anew && r.whole.Origin != unix(d.loads.Since) { // it was found in the readings
			d.adopt(r.whole.Origin)
		}
		d.setLoads()
		// Its Since bins count from another load where one was marked meanwhile.
		d.baseline.since = d.baseline.since || d.book.Origin != 0 && r.whole.Origin != d.book.Origin
		if err := d.book.Merge(r.whole); err != nil {
			d.o.Log.Error("the stored bins do not fit", "error", err)
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
		out.since = rollup.NewBook(seriesNames(d.o.Rig)...)
		out.since.SetOrigin(origin)
		out.err = d.readFolder(ctx, out.since, origin, now)
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
		book := rollup.NewBook(seriesNames(d.o.Rig)...)
		if err := d.readFolder(ctx, book, before-int64(baselineFrom), before-int64(baselineTo)); err != nil {
			return values, known, err
		}
		for i := range n {
			values[i], known[i] = meanOf(book.Series[i].Whole.Bins)
		}
	}
	return values, known, nil
}

func meanOf(bins []rollup.Bin) (float64, bool) {
	sum, n := 0.0, int64(0)
	for i := range bins {
		sum, n = sum+bins[i].Sum, n+bins[i].N
	}
	if n == 0 {
		return math.NaN(), false
	}
	return sum / float64(n), true
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
