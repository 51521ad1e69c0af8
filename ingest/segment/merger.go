package segment

import (
	"bytes"
	"math"
)

// merger puts the decoded chunks together in order: it checks that blocks
// follow each other, re-times, numbers the gauges and keeps the report.
type merger struct {
	folder *Folder
	opts   ReadOptions
	report Report
	names  []string
	ids    map[string]uint16
	remap  [][]int32 // by worker: its numbers to ours, -1 unknown
	only   map[uint16]bool
	some   bool // only some lines are wanted
	chunks []frameInfo
	absurd bool // the chunk has quarantined lines, to be dropped

	// of the file being read
	chain   uint32
	chained bool
	hurt    bool // something was lost since the last whole block
	boot    string
	prev    *ClockState
	last    int64 // greatest stamp so far
	end     *checkpoint
	sealed  bool
}

func (m *merger) init(d *Folder, opts ReadOptions) {
	m.folder, m.opts = d, opts
	m.ids = map[string]uint16{}
	m.remap = make([][]int32, opts.Workers)
	for _, n := range opts.Gauges {
		m.id(n)
	}
	if opts.Only != nil {
		m.only = map[uint16]bool{}
		for _, n := range opts.Only {
			m.only[m.id(n)] = true
		}
	}
	m.some = opts.Only != nil || opts.Spans != nil
}

func (m *merger) id(name string) uint16 {
	if id, ok := m.ids[name]; ok {
		return id
	}
	id := uint16(len(m.names))
	m.ids[name] = id
	m.names = append(m.names, name)
	return id
}

func (m *merger) damage(d Damage) { m.report.Damage = append(m.report.Damage, d) }

func (m *merger) merge(j *job) {
	b := &j.batch
	b.File, b.Foreign = j.file.name, !j.file.own
	if j.first {
		m.chain, m.chained, m.hurt, m.boot, m.prev, m.last, m.end, m.sealed = 0, false, false, j.file.header.Boot, nil, 0, nil, false
		m.report.Damage = append(m.report.Damage, j.file.damage...)
	}
	if j.gap {
		m.chained, m.prev = false, nil
	}
	m.renumber(j)
	rows, more := 0, 0
	for i := range j.items {
		it := &j.items[i]
		switch it.kind {
		case itemHeader:
			m.header(j, it)
		case itemBlock:
			m.block(j, it, rows, more)
			rows, more = it.rows, it.more
		case itemLoss:
			m.loss(j, it, i)
		case itemTail:
			if j.fail == nil {
				m.tail(j, it)
			}
		}
	}
	if j.fail != nil {
		m.failure(j)
	}
	m.learn(j)
	// Lines that are no records stand behind the other items: they were found
	// while the blocks were decoded.
	for i := range j.items {
		if it := &j.items[i]; it.kind == itemLine {
			m.damage(Damage{File: j.file.name, Offset: j.base + int64(it.from), Length: int64(it.to - it.from),
				Lines: 1, Why: "no valid record: " + it.why})
		}
	}
	if m.absurd {
		b.drop(func(i int) bool { return b.Time[i] == quarantined }, func(i int) bool { return b.Others[i].Time == quarantined })
		m.absurd = false
	}
	if m.some {
		m.filter(b)
	}
	m.report.Readings += int64(len(b.Gauge))
	for i := range b.Others {
		if b.Others[i].Kind == Indication {
			m.report.Readings++
		}
	}
	m.report.Lines += int64(b.Len())
}

// failure reports a chunk that could not be read or unpacked.
func (m *merger) failure(j *job) {
	if j.fail == errStored {
		// The blocks in it were checked one by one; only the storage is hurt.
		m.damage(Damage{File: j.file.name, Offset: j.base, Length: j.frame.text,
			Why: "a compressed frame: " + j.fail.Error() + ", though it unpacks"})
		return
	}
	m.hurt = true
	d := Damage{File: j.file.name, Offset: j.base + int64(len(j.text)), Lines: -1, First: m.last,
		Why: "cannot be read: " + j.fail.Error()}
	if j.frame != nil {
		d.Length, d.First, d.Last = j.frame.text, j.frame.first, j.frame.last
	} else {
		d.Length = max(0, j.file.size-d.Offset)
	}
	m.damage(d)
}

// learn remembers where the chunks of a plain segment lie, for a later pass
// that wants only some of it.
func (m *merger) learn(j *job) {
	if j.frame != nil || j.file.compressed {
		return
	}
	if j.first {
		m.chunks = nil
	}
	var f frameInfo
	if j.file.own {
		f = chunkInfo(j.items)
	} else {
		f = j.batch.bounds()
	}
	f.at, f.text = j.base, int64(len(j.text))
	f.set = f.set && j.fail == nil
	m.chunks = append(m.chunks, f)
	if j.final && j.fail == nil {
		m.folder.learn(j.file.name, m.chunks)
	}
}

// bounds sums up a foreign chunk for seeking.
func (b *Batch) bounds() frameInfo {
	f := frameInfo{set: true, first: math.MaxInt64, last: math.MinInt64}
	for _, t := range b.Time {
		f.first, f.last = min(f.first, t), max(f.last, t)
	}
	for i := range b.Others {
		t := b.Others[i].Time
		f.first, f.last = min(f.first, t), max(f.last, t)
	}
	return f
}

func (m *merger) header(j *job, it *item) {
	if m.chained && it.h.after != m.chain && !m.hurt {
		m.damage(Damage{File: j.file.name, Offset: j.base + int64(it.from), Lines: -1, First: m.last,
			Why: "blocks are missing before this header"})
	}
	m.boot = it.h.Boot
	clock := it.h.Clock
	m.prev, m.chain, m.chained, m.hurt = &clock, it.h.self, true, false
}

func (m *merger) block(j *job, it *item, rows, more int) {
	c := &it.c
	if !j.file.own {
		return
	}
	at := j.base + int64(it.from)
	switch {
	case !it.whole:
		m.damage(Damage{File: j.file.name, Block: c.block, Offset: at, Length: int64(it.to - it.from),
			First: c.first, Last: c.last, Lines: c.lines, Why: it.why})
	case m.chained && c.after != m.chain && !m.hurt:
		m.damage(Damage{File: j.file.name, Block: c.block, Offset: at, First: m.last, Last: c.first, Lines: -1,
			Why: "blocks are missing before this one"})
	case m.end != nil:
		if want, _ := m.end.closing(); m.sealed || c.self != want.self {
			m.damage(Damage{File: j.file.name, Block: c.block, Offset: at, Length: int64(it.to - it.from),
				Lines: c.lines, Why: "bytes behind the end of a closed file"})
		}
		m.sealed = true
	}
	if m.chained && c.after != m.chain {
		m.prev = nil // the comment before this block is not known
	}
	if it.whole {
		m.instants(j, it, rows, more)
	}
	if c.end && m.end == nil {
		end := *c
		m.end = &end
	}
	if c.lines > 0 {
		m.last = c.last
	}
	clock := c.clock
	m.prev, m.chain, m.chained, m.hurt = &clock, c.self, true, false
}

// instants re-times the rows of a block and drops absurd ones.
func (m *merger) instants(j *job, it *item, rows, more int) {
	c := &it.c
	bc := blockClock{now: c.clock, prev: m.prev}
	bc.fix, bc.fixed = m.folder.fixes[m.boot]
	if bc.plainBlock() && (c.lines == 0 || !bc.absurd(c.first, asWritten) && !bc.absurd(c.last, asWritten)) {
		return
	}
	b := &j.batch
	for i := rows; i < it.rows; i++ {
		b.Time[i] = m.instant(j.file.name, &bc, b.Time[i])
	}
	for i := more; i < it.more; i++ {
		b.Others[i].Time = m.instant(j.file.name, &bc, b.Others[i].Raw)
	}
}

// quarantined marks a stamp whose line is to be left out.
const quarantined = math.MinInt64

func (m *merger) instant(file string, bc *blockClock, raw int64) int64 {
	t, v := bc.instant(raw)
	if bc.absurd(t, v) {
		addSpan(&m.report.Quarantined, file, raw, 0)
		m.absurd = true
		return quarantined
	}
	switch v {
	case retimed:
		addSpan(&m.report.Retimed, file, raw, t-raw)
	case unset:
		addSpan(&m.report.Unset, file, raw, 0)
	}
	return t
}

// addSpan counts a stamp in the last span where that fits: one file, and one
// shift within a second.
func addSpan(spans *[]Span, file string, raw, shift int64) {
	if n := len(*spans); n > 0 {
		s := &(*spans)[n-1]
		if s.File == file && within(s.Shift-shift, slewLimit) {
			s.Lines++
			s.First, s.Last = min(s.First, raw), max(s.Last, raw)
			return
		}
	}
	*spans = append(*spans, Span{File: file, Lines: 1, First: raw, Last: raw, Shift: shift})
}

func (m *merger) loss(j *job, it *item, index int) {
	d := Damage{File: j.file.name, Offset: j.base + int64(it.from), Length: int64(it.to - it.from),
		First: m.last, Lines: -1, Why: it.why}
	for _, next := range j.items[index+1:] {
		if next.kind == itemBlock && next.c.lines > 0 {
			d.Last = next.c.first
			break
		}
	}
	m.hurt = true
	m.damage(d)
}

func (m *merger) tail(j *job, it *item) {
	if m.end != nil {
		_, text := m.end.closing()
		rest := bytes.TrimRight(j.text[it.from:it.to], "\x00")
		if m.sealed || !bytes.HasPrefix(text, rest) {
			m.damage(Damage{File: j.file.name, Offset: j.base + int64(it.from), Length: int64(it.to - it.from),
				Why: "bytes behind the end of a closed file"})
			return
		}
	}
	m.report.Tails = append(m.report.Tails, Tail{j.file.name, j.base + int64(it.from), int64(it.to - it.from)})
}

// renumber turns the worker's numbers of gauges into the reader's, which are
// given in order of appearance.
func (m *merger) renumber(j *job) {
	table := m.remap[j.who]
	same := true
	for len(table) < len(j.names) {
		table = append(table, -1)
	}
	m.remap[j.who] = table
	for i := range j.names {
		same = same && table[i] == int32(i)
	}
	if same {
		return
	}
	for i, local := range j.batch.Gauge {
		g := table[local]
		if g < 0 {
			g = int32(m.id(j.names[local]))
			table[local] = g
		}
		j.batch.Gauge[i] = uint16(g)
	}
}
