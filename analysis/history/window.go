package history

import (
	"cmp"
	"fmt"
	"io"
	"math"
	"slices"

	"gaugelog/ingest/segment"
)

// WindowMost bounds the readings of one gauge that a Window holds, to within a
// factor of two: up to twice as many are given one and all; where there are
// more, the window is cut into WindowMost equal parts and the first reading of
// each is given.
const WindowMost = 1 << 14

// thinner gathers one gauge's readings of a window, whatever their order.
type thinner struct {
	from, part int64
	list       []Sample // all of them, or the first of each part
	thin       bool
}

func newThinner(from, to int64) thinner {
	return thinner{from: from, part: max((to-from)/WindowMost+1, 1)}
}

// none is the instant of a part without a reading.
const none = math.MinInt64

func (w *thinner) add(s Sample) {
	if w.thin {
		w.keep(s)
		return
	}
	w.list = append(w.list, s)
	if len(w.list) <= 2*WindowMost {
		return
	}
	all := w.list
	w.list, w.thin = make([]Sample, WindowMost), true
	for i := range w.list {
		w.list[i].Time = none
	}
	for _, s := range all {
		w.keep(s)
	}
}

func (w *thinner) keep(s Sample) {
	if p := &w.list[(s.Time-w.from)/w.part]; p.Time == none || s.Time < p.Time {
		*p = s
	}
}

func (w *thinner) samples() []Sample {
	if w.thin {
		return slices.DeleteFunc(w.list, func(s Sample) bool { return s.Time == none })
	}
	byTime := func(a, b Sample) int { return cmp.Compare(a.Time, b.Time) }
	if !slices.IsSortedFunc(w.list, byTime) {
		slices.SortStableFunc(w.list, byTime)
	}
	return w.list
}

// Window reads the folder again between the two instants.
func (s *folderSource) Window(from, to int64) ([][]Sample, error) {
	gauges := make([]thinner, len(s.names))
	for g := range gauges {
		gauges[g] = newThinner(from, to)
	}
	opts := between(from, to)
	opts.Gauges = s.names
	r := s.folder.Read(opts)
	defer r.Close()
	for {
		b, err := r.Next()
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, fmt.Errorf("read %s: %w", segment.ReadingsDir, err)
		}
		for i, g := range b.Gauge {
			if int(g) < len(gauges) {
				gauges[g].add(Sample{b.Time[i], mm(b.Micro[i])})
			}
		}
		for i := range b.Others {
			if rec := &b.Others[i]; rec.Kind == segment.Indication {
				if g, ok := s.numbers[rec.Name]; ok {
					gauges[g].add(Sample{rec.Time, mm(toMicro(rec.MM))})
				}
			}
		}
	}
	out := make([][]Sample, len(gauges))
	for g := range gauges {
		out[g] = gauges[g].samples()
	}
	return out, nil
}
