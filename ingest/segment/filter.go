package segment

// filter keeps what the options ask for.
func (m *merger) filter(b *Batch) {
	outside := func(t int64) bool { return m.opts.Spans != nil && !touches(m.opts.Spans, t, t) }
	b.drop(func(i int) bool {
		return outside(b.Time[i]) || m.only != nil && !m.only[b.Gauge[i]]
	}, func(i int) bool {
		r := &b.Others[i]
		if outside(r.Time) {
			return true
		}
		if m.only == nil {
			return false
		}
		id, known := m.ids[r.Name]
		return r.Kind != Indication || !known || !m.only[id]
	})
}

// drop removes the rows and others for which the functions say so. Both are
// called once an index, in order, before it is overwritten.
func (b *Batch) drop(row, other func(i int) bool) {
	keep, o, kept := 0, 0, 0
	for i := 0; ; i++ {
		for ; o < len(b.Others) && b.OtherAt[o] == i; o++ {
			if !other(o) {
				b.Others[kept], b.OtherAt[kept] = b.Others[o], keep
				kept++
			}
		}
		if i == len(b.Gauge) {
			break
		}
		if !row(i) {
			b.Gauge[keep], b.Micro[keep], b.Time[keep] = b.Gauge[i], b.Micro[i], b.Time[i]
			keep++
		}
	}
	b.Gauge, b.Micro, b.Time = b.Gauge[:keep], b.Micro[:keep], b.Time[:keep]
	clear(b.Others[kept:])
	b.Others, b.OtherAt = b.Others[:kept], b.OtherAt[:kept]
}
