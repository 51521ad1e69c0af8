package segment

import (
	"fmt"
	"io"
	"iter"
)

// Records gives the records of the pass one by one, rows and others in their
// order: for readers of few lines. It uses up the Reader.
func (r *Reader) Records() iter.Seq2[Record, error] {
	return func(yield func(Record, error) bool) {
		for {
			b, err := r.Next()
			if err == io.EOF {
				return
			}
			if err != nil {
				yield(Record{}, err)
				return
			}
			if !b.Each(r.Gauges(), func(rec Record) bool { return yield(rec, nil) }) {
				return
			}
		}
	}
}

// Each calls f with each record in order until it returns false, and says
// whether f took all; gauges names the gauges by their numbers. Raw of a row is
// its Time: the columns do not keep the stamp as written.
func (b *Batch) Each(gauges []string, f func(Record) bool) bool {
	o := 0
	for i := 0; ; i++ {
		for ; o < len(b.Others) && b.OtherAt[o] == i; o++ {
			if !f(b.Others[o]) {
				return false
			}
		}
		if i == len(b.Gauge) {
			return true
		}
		rec := Record{Kind: Indication, Name: gauges[b.Gauge[i]], Time: b.Time[i], Raw: b.Time[i], MM: float64(b.Micro[i]) / 1e6}
		if !f(rec) {
			return false
		}
	}
}

// Log reads marks.lp or events.lp: its records in order, re-timed as readings
// are, and what was found beside them. A missing file is empty.
func (d *Folder) Log(name string) ([]Record, *Report, error) {
	f := segFile{name: name, limit: -1}
	file, err := d.fs.Open(name)
	if isNotExist(err) {
		return nil, &Report{}, nil
	}
	if err == nil {
		file.Close()
	}
	if err := d.look(&f); err != nil {
		return nil, nil, err
	}
	if f.own && f.size > chunkSize {
		// A header that passes over what lies before it may stand in another
		// chunk than that.
		if err := d.commentsAt(&f, func(it item, at int64) bool {
			if it.kind == itemHeader && it.h.Torn > 0 {
				f.torn = append(f.torn, [2]int64{at - it.h.Torn, at})
			}
			return true
		}); err != nil {
			return nil, nil, fmt.Errorf("%s: %w", name, err)
		}
	}
	one := &Folder{fs: d.fs, files: []segFile{f}, fixes: d.fixes}
	r := one.Read(ReadOptions{Workers: 1})
	defer r.Close()
	var out []Record
	for rec, err := range r.Records() {
		if err != nil {
			return nil, nil, err
		}
		out = append(out, rec)
	}
	return out, r.Report(), nil
}
