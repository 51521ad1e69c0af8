package segment

import (
	"math"
	"runtime"
	"sync"

	"github.com/klauspost/compress/zstd"
)

// ReadOptions chooses what a Reader gives.
type ReadOptions struct {
	// Workers is how many blocks are read at once; 0 is GOMAXPROCS. The result
	// does not depend on it.
	Workers int
	// From and To bound the instants given, both inclusive, in ns since 1970
	// UTC; both 0 gives all.
	From, To int64
	// Spans, where not nil, gives what lies in any of these stretches instead.
	Spans []Interval
	// Gauges, where not nil, fixes the first numbers of the gauges: the gauge
	// Gauges[i] gets number i. Others follow in order of appearance.
	Gauges []string
	// Only, where not nil, gives indications of these gauges alone, and no
	// other lines.
	Only []string
}

// Interval is a stretch of time, both ends inclusive, in ns since 1970 UTC.
type Interval struct{ From, To int64 }

// touches tells whether a wanted instant may lie between first and last.
func touches(spans []Interval, first, last int64) bool {
	for _, s := range spans {
		if last >= s.From && first <= s.To {
			return true
		}
	}
	return false
}

// job is one chunk on its way through the reader.
type job struct {
	file  *segFile
	base  int64 // of text in the file's text
	text  []byte
	packd []byte // stored frame, to be unpacked into text
	frame *frameInfo
	limit int64      // of the frame's text; the rest does not count
	gap   bool       // chunks before it in the file were passed over
	first bool       // of its file
	final bool       // of its file
	spans []Interval // what is wanted of it, nil for all
	only  bool       // indications alone are wanted
	batch Batch
	items []item
	fail  error    // reading the file failed here
	names []string // of the worker, when it was done
	who   int      // the worker
	done  chan struct{}
}

// Reader gives the records of a run folder in order: segments by number, and
// in a segment as they stand in it. Not safe for use by several goroutines.
type Reader struct {
	folder *Folder
	opts   ReadOptions
	order  chan *job
	free   chan *job
	quit   chan struct{}
	wg     sync.WaitGroup
	held   *job
	merger merger
	closed bool
}

// Read starts a pass over the folder. The caller must call Close.
func (d *Folder) Read(opts ReadOptions) *Reader {
	if opts.Workers <= 0 {
		opts.Workers = runtime.GOMAXPROCS(0)
	}
	if opts.From == 0 && opts.To == 0 {
		opts.From, opts.To = math.MinInt64, math.MaxInt64
	}
	if opts.Spans == nil && (opts.From != math.MinInt64 || opts.To != math.MaxInt64) {
		opts.Spans = []Interval{{opts.From, opts.To}}
	}
	slots := 2*opts.Workers + 1
	r := &Reader{
		folder: d, opts: opts,
		order: make(chan *job, slots), free: make(chan *job, slots), quit: make(chan struct{}),
	}
	r.merger.init(d, opts)
	for range slots {
		r.free <- &job{}
	}
	work := make(chan *job, slots)
	for i := range opts.Workers {
		r.wg.Go(func() { decodeJobs(work, i) })
	}
	r.wg.Go(func() {
		defer close(work)
		defer close(r.order)
		for i := range d.files {
			if !r.produce(&d.files[i], work) {
				return
			}
		}
	})
	return r
}

// Next returns the next batch that holds a record, io.EOF behind the last.
// Damage is no error: it is left out and stands in Report.
func (r *Reader) Next() (*Batch, error) {
	if r.held != nil {
		r.free <- r.held
		r.held = nil
	}
	j, err := r.advance()
	if err != nil {
		return nil, err
	}
	r.held = j
	return &j.batch, nil
}

// Gauges names the gauges by their numbers in a Batch, as far as they are known.
// The slice grows by appending only.
func (r *Reader) Gauges() []string { return r.merger.names }

// Report tells what was found up to here; whole once Next gave io.EOF.
func (r *Reader) Report() *Report { return &r.merger.report }

// Close ends the pass, early or not, and waits for its goroutines.
func (r *Reader) Close() {
	if r.closed {
		return
	}
	r.closed = true
	close(r.quit)
	for range r.order {
	}
	r.wg.Wait()
}

// take waits for a free job; false once the reader is closed.
func (r *Reader) take() (*job, bool) {
	select {
	case j := <-r.free:
		*j = job{text: j.text[:0], packd: j.packd[:0], batch: j.batch, items: j.items[:0], spans: r.opts.Spans, only: r.opts.Only != nil, done: make(chan struct{})}
		j.batch.reset()
		return j, true
	case <-r.quit:
		return nil, false
	}
}

func (r *Reader) send(j *job, work chan<- *job) {
	// Both have room for every job there is.
	work <- j
	r.order <- j
}

// produce cuts one segment into jobs; false once the reader is closed.
func (r *Reader) produce(f *segFile, work chan<- *job) bool {
	file, err := r.folder.fs.Open(f.name)
	if err != nil {
		return r.failed(f, 0, err, work)
	}
	defer file.Close()
	if f.index != nil {
		return r.produceFrames(file, f, f.index.frames, work)
	}
	if chunks := r.folder.known(f.name); chunks != nil && r.merger.some {
		return r.produceFrames(file, f, chunks, work)
	}
	text, closeText, err := openText(file, f)
	if err != nil {
		return r.failed(f, 0, err, work)
	}
	defer closeText()
	s := splitter{r: text, about: chunkSize, foreign: !f.own}
	if !f.compressed {
		s.size = f.size
	}
	for first := true; ; first = false {
		j, ok := r.take()
		if !ok {
			return false
		}
		j.file, j.base, j.first = f, s.off, first
		j.text, j.final, j.fail = s.next(j.text)
		final := j.final
		r.send(j, work)
		if final {
			return true
		}
	}
}

func (r *Reader) failed(f *segFile, at int64, err error, work chan<- *job) bool {
	j, ok := r.take()
	if !ok {
		return false
	}
	j.file, j.base, j.first, j.final, j.fail = f, at, at == 0, true, err
	r.send(j, work)
	return true
}

// produceFrames makes jobs of a segment whose frames (or chunks, where it is
// plain) are known, and passes over those that hold nothing wanted.
func (r *Reader) produceFrames(file File, f *segFile, frames []frameInfo, work chan<- *job) bool {
	gap, first := false, true
	for i := range frames {
		fr := &frames[i]
		if f.limit >= 0 && fr.at >= f.limit {
			break
		}
		if fr.set && r.opts.Spans != nil && !touches(r.opts.Spans, fr.first, fr.last) {
			gap = true
			continue
		}
		j, ok := r.take()
		if !ok {
			return false
		}
		j.file, j.base, j.frame, j.first, j.gap = f, fr.at, fr, first, gap
		j.final = i == len(frames)-1
		j.limit = fr.text
		if f.limit >= 0 {
			j.limit = min(j.limit, f.limit-fr.at)
		}
		if f.compressed {
			j.packd = grow(j.packd, fr.size)
			j.fail = readFull(file, j.packd, fr.offset)
		} else {
			j.text = grow(j.text, fr.text)
			if j.fail = readFull(file, j.text, fr.at); j.fail != nil {
				j.text = j.text[:0]
			}
		}
		r.send(j, work)
		gap, first = false, false
	}
	return true
}

// decodeJobs is one worker.
func decodeJobs(work <-chan *job, who int) {
	names := newInterner(nil)
	var dec *zstd.Decoder
	defer func() {
		if dec != nil {
			dec.Close()
		}
	}()
	for j := range work {
		if j.frame != nil && j.file.compressed && j.fail == nil {
			if dec == nil {
				dec = newFrameDecoder(zstd.IgnoreChecksum(true))
			}
			j.text, j.fail = j.frame.unpack(dec, j.packd, j.text)
		}
		j.decode(names)
		j.who, j.names = who, names.names
		close(j.done)
	}
}

func (j *job) decode(names *interner) {
	if j.frame != nil && int64(len(j.text)) > j.limit {
		j.text = j.text[:j.limit]
	}
	if !j.file.own {
		j.decodeForeign(names)
		return
	}
	j.items = splitBlocks(j.text, j.items)
	for _, t := range j.file.torn {
		j.items = without(j.items, t[0]-j.base, t[1]-j.base)
	}
	for i := range j.items {
		it := &j.items[i]
		if it.kind == itemTail && !j.final {
			it.kind, it.why = itemLoss, "no whole block"
		}
		if it.kind == itemBlock && it.whole && !j.passes(i) {
			j.lines(it.from, it.from+int(it.c.length), names)
			it = &j.items[i] // lines may have moved them
		}
		it.rows, it.more = len(j.batch.Gauge), len(j.batch.Others)
	}
}

// passes tells that nothing is wanted of block i, as its comment shows: its
// stamps stand as written, for the clock was set before it and was not stepped.
func (j *job) passes(i int) bool {
	if j.spans == nil || i == 0 {
		return false
	}
	c, before := &j.items[i].c, &j.items[i-1]
	prev := &before.c.clock
	switch before.kind {
	case itemHeader:
		prev = &before.h.Clock
	case itemBlock:
	default:
		return false
	}
	clock := blockClock{now: c.clock, prev: prev}
	return c.lines > 0 && clock.plainBlock() && !touches(j.spans, c.first, c.last)
}

// without drops the items that lie in a torn stretch of which the header stands
// in a later chunk; from and to are in the chunk's text, and may lie outside it.
func without(items []item, from, to int64) []item {
	kept := items[:0]
	for _, it := range items {
		if a, b := int64(it.from), int64(it.to); a < from || b > to {
			if it.kind == itemLoss || it.kind == itemTail {
				if a < from && b > from && b <= to {
					it.to = int(from)
				}
				if a >= from && a < to && b > to {
					it.from = int(to)
				}
			}
			kept = append(kept, it)
		}
	}
	return kept
}

// decodeForeign takes a chunk without comments: every whole line counts.
func (j *job) decodeForeign(names *interner) {
	end := len(j.text)
	if j.final {
		end = lastLineCut(j.text)
	}
	j.lines(0, end, names)
	j.items = append(j.items, item{kind: itemBlock, to: end, whole: true,
		rows: len(j.batch.Gauge), more: len(j.batch.Others)})
	if end < len(j.text) {
		j.items = append(j.items, item{kind: itemTail, from: end, to: len(j.text)})
	}
}

func (j *job) lines(from, to int, names *interner) {
	j.batch.decodeLines(j.text[from:to], names, j.only, func(a, b int, why string) {
		j.items = append(j.items, item{kind: itemLine, from: from + a, to: from + b, why: why})
	})
}

// known returns the chunks of a plain segment that a whole pass went through.
func (d *Folder) known(name string) []frameInfo {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.chunks[name]
}

func (d *Folder) learn(name string, chunks []frameInfo) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.chunks == nil {
		d.chunks = map[string][]frameInfo{}
	}
	if d.chunks[name] == nil {
		d.chunks[name] = chunks
	}
}
