package segment

import "bytes"

// indicationWord begins every line that may be an indication.
var indicationWord = []byte("indication")

// Batch is a stretch of consecutive records. Indications that carry nothing
// but a value that is a whole number of millionths of a millimetre stand in the
// columns Gauge, Micro and Time, one a row; everything else (other kinds,
// indications with further fields or finer values) stands in Others.
//
// A Batch belongs to its Reader and is valid until the next call of Next.
type Batch struct {
	// File is the segment the records come from, its name in the run folder.
	File string
	// Foreign says that the segment carries none of this format's comments.
	Foreign bool
	// Gauge is the number of the gauge in Reader.Gauges.
	Gauge []uint16
	// Micro is the indication in millionths of a mm; float64(Micro)/1e6 is the
	// nearest float64 to the number as written.
	Micro []int64
	// Time is in ns since 1970 UTC, re-timed where FORMAT.md says so.
	Time []int64
	// Others are the other records in order; Others[i] stands before row
	// OtherAt[i] of the columns.
	Others  []Record
	OtherAt []int
}

// Len is the number of records.
func (b *Batch) Len() int { return len(b.Gauge) + len(b.Others) }

func (b *Batch) reset() {
	b.File = ""
	b.Gauge, b.Micro, b.Time = b.Gauge[:0], b.Micro[:0], b.Time[:0]
	clear(b.Others)
	b.Others, b.OtherAt = b.Others[:0], b.OtherAt[:0]
}

// decodeLines appends the records of whole lines. bad is called for each line
// that is no valid record, with its place in text. With only, lines of other
// measurements than indication are passed over unread.
func (b *Batch) decodeLines(text []byte, names *interner, only bool, bad func(from, to int, why string)) {
	cols := columns{b.Gauge, b.Micro, b.Time}
	for p := 0; p < len(text); {
		p += fastLines(text[p:], &cols, names)
		if p == len(text) {
			break
		}
		n := entryEnd(text[p:])
		if n < 0 {
			n = lineEnd(text[p:])
		}
		if only && !bytes.HasPrefix(text[p+blankEnd(text[p:p+n], 0):], indicationWord) {
			p += n
			continue
		}
		rec, ok, err := slowLine(text[p : p+n])
		switch {
		case err != nil:
			bad(p, p+n, err.Error())
		case ok && !b.plain(&rec, &cols, names):
			b.Others = append(b.Others, rec)
			b.OtherAt = append(b.OtherAt, len(cols.gauge))
		}
		p += n
	}
	b.Gauge, b.Micro, b.Time = cols.gauge, cols.micro, cols.time
}

// plain puts an indication in the columns where it fits in.
func (b *Batch) plain(rec *Record, cols *columns, names *interner) bool {
	if rec.Kind != Indication || rec.Point != nil {
		return false
	}
	micro, exact := toMicro(rec.MM)
	if !exact {
		return false
	}
	id, ok := names.add([]byte(rec.Name))
	if !ok {
		return false
	}
	cols.gauge = append(cols.gauge, id)
	cols.micro = append(cols.micro, micro)
	cols.time = append(cols.time, rec.Time)
	return true
}

// lineEnd is the length of the first physical line with its newline.
func lineEnd(text []byte) int {
	for i, c := range text {
		if c == '\n' {
			return i + 1
		}
	}
	return len(text)
}
