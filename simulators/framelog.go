package simulators

import (
	"io"
	"strconv"
)

// frameLog writes one JSON line a frame:
//
//	{"kind":"frame","gauge":"mid","at_s":12.345,"unix_ns":1772438412345000000,"mm":1.234,"state":"intact","status":"hold"}
//
// The state is intact, doubtful, no-reading or damaged; status stands there
// where the frame says one.
type frameLog struct {
	to    io.Writer
	start int64 // wall clock, ns
	line  []byte
	err   error // the first; nothing is written after it
}

// State is what became of the frame: intact, doubtful, no-reading or damaged.
func (f *Frame) State() string {
	switch {
	case f.NoReading:
		return "no-reading"
	case f.Damaged:
		return "damaged"
	case f.Doubtful:
		return "doubtful"
	}
	return "intact"
}

func (l *frameLog) add(f *Frame) {
	if l.err != nil {
		return
	}
	b := append(l.line[:0], `{"kind":"frame","gauge":`...)
	b = strconv.AppendQuote(b, f.Name)
	b = append(b, `,"at_s":`...)
	b = strconv.AppendFloat(b, seconds(f.At.Wall-l.start), 'f', -1, 64)
	b = append(b, `,"unix_ns":`...)
	b = strconv.AppendInt(b, f.At.Wall, 10)
	b = append(b, `,"mm":`...)
	b = strconv.AppendFloat(b, f.MM, 'g', -1, 64)
	b = append(b, `,"state":"`...)
	b = append(b, f.State()...)
	b = append(b, '"')
	if f.Status != "" {
		b = append(b, `,"status":"`...)
		b = append(append(b, f.Status...), '"')
	}
	l.line = append(b, "}\n"...)
	_, l.err = l.to.Write(l.line)
}
