package history

import (
	"fmt"
	"io"
	"math"
	"sort"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// folderSource is a Source over a run folder. It keeps bins only; single
// readings are read again when asked for.
type folderSource struct {
	folder *segment.Folder
	rig    *config.Rig
	names  []string // of the gauges, in the rig's order
	width  int64
	series []series // by gauge
	probes []probe
	other  map[string]int64 // readings of gauges the rig does not name
}

// series is one gauge in the making.
type series struct {
	counter *counter
	bins    []Bin
	scratch []tally
	n       int64
	first   int64
	last    int64
	behind  int64 // readings that came before the one before them
	open    bool
}

func newFolderSource(folder *segment.Folder, rig *config.Rig, width int64) *folderSource {
	s := &folderSource{folder: folder, rig: rig, width: width, other: map[string]int64{}}
	for _, g := range rig.Gauges {
		s.names = append(s.names, g.Name)
		s.series = append(s.series, series{counter: newCounter(g.Resolution.Value)})
	}
	s.probes = make([]probe, len(rig.Probes))
	for i := range s.probes {
		s.probes[i].width = max(width, 60*second)
	}
	return s
}

// pass goes over all readings once.
func (s *folderSource) pass(h *History) error {
	r := s.folder.Read(segment.ReadOptions{Gauges: s.names})
	defer r.Close()
	var strangers []int64
	for {
		b, err := r.Next()
		if err == io.EOF {
			break
		}
		if err != nil {
			return fmt.Errorf("read %s: %w", segment.ReadingsDir, err)
		}
		for i, g := range b.Gauge {
			if int(g) < len(s.series) {
				s.series[g].add(b.Time[i], b.Micro[i], s.width)
				continue
			}
			for len(strangers) <= int(g)-len(s.series) {
				strangers = append(strangers, 0)
			}
			strangers[int(g)-len(s.series)]++
		}
		for i := range b.Others {
			s.take(h, &b.Others[i])
		}
	}
	for i, n := range strangers {
		if n > 0 {
			s.other[r.Gauges()[len(s.series)+i]] += n
		}
	}
	s.finish(h, r.Report())
	return nil
}

// take handles a line that is no plain indication.
func (s *folderSource) take(h *History, rec *segment.Record) {
	switch rec.Kind {
	case segment.Indication:
		for g, name := range s.names {
			if name == rec.Name {
				s.series[g].add(rec.Time, toMicro(rec.MM), s.width)
				return
			}
		}
		s.other[rec.Name]++
	case segment.Ambient:
		for i := range s.rig.Probes {
			if s.rig.Probes[i].Name == rec.Name {
				s.probes[i].add(rec)
			}
		}
	case segment.Event:
		h.addEvent(rec)
	default:
		h.addMark(rec) // foreign folders may keep marks among readings
	}
}

// finish closes the bins and fills in what the History says of the run.
func (s *folderSource) finish(h *History, report *segment.Report) {
	h.noteReport(report)
	h.GaugeReadings = make([]int64, len(s.series))
	for g := range s.series {
		v := &s.series[g]
		v.finish()
		h.GaugeReadings[g] = v.n
		if v.n > 0 {
			if h.Readings == 0 || v.first < h.First {
				h.First = v.first
			}
			if h.Readings == 0 || v.last > h.Last {
				h.Last = v.last
			}
			h.Readings += v.n
		}
		if v.counter.inexact {
			h.Notes = append(h.Notes, notMultiple(s.rig.Gauges[g]))
		}
		if v.behind > 0 {
			h.Notes = append(h.Notes, Note{Code: "out-of-order", Gauge: s.names[g], Text: fmt.Sprintf(
				"%d readings of gauge %s stand out of the order of time; they were put in order", v.behind, s.names[g])})
		}
		v.counter, v.scratch = nil, nil
	}
	var names []string
	for n := range s.other {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		h.Notes = append(h.Notes, Note{Code: "unknown-gauge", Gauge: n, Text: fmt.Sprintf(
			"the readings hold %d of a gauge %q that the rig file does not name; they were left out", s.other[n], n)})
	}
	for i := range s.probes {
		s.probes[i].finish()
	}
}

// add takes one reading.
func (v *series) add(t, value, width int64) {
	c := v.counter
	if !v.open || t >= c.to || t < c.from {
		v.roll(t, width)
	}
	if t < c.lastTime && c.n > 0 {
		v.behind++
	}
	c.add(t, value)
}

// roll closes the open bin and opens the one that holds t.
func (v *series) roll(t, width int64) {
	v.flush()
	from := t - mod(t, width)
	v.counter.start(from, from+width)
	if !v.open {
		v.first, v.last, v.open = t, t, true
	}
	if t < v.last {
		v.behind++
	}
	v.first = min(v.first, t)
}

func (v *series) flush() {
	b, ok := v.counter.finish(&v.scratch)
	if !ok {
		return
	}
	v.n += int64(b.N)
	v.last = max(v.last, b.LastTime)
	v.bins = append(v.bins, b)
}

// finish closes the last bin, and merges bins that readings out of order have
// made several of.
func (v *series) finish() {
	v.flush()
	if v.behind == 0 {
		return
	}
	sort.SliceStable(v.bins, func(i, j int) bool { return v.bins[i].From < v.bins[j].From })
	out := v.bins[:0]
	for _, b := range v.bins {
		if n := len(out); n > 0 && out[n-1].From == b.From {
			out[n-1] = mergeBins(out[n-1], b)
			continue
		}
		out = append(out, b)
	}
	v.bins = out
}

// mergeBins joins two bins of the same stretch; medians are averaged by number.
func mergeBins(a, b Bin) Bin {
	n := a.N + b.N
	f := float64(b.N) / float64(n)
	a.Time += int64(float64(b.Time-a.Time) * f)
	a.Median += (b.Median - a.Median) * f
	a.MAD += (b.MAD - a.MAD) * f
	a.SD += (b.SD - a.SD) * f
	a.Min, a.Max = min(a.Min, b.Min), max(a.Max, b.Max)
	if b.LastTime > a.LastTime {
		a.Last, a.LastTime = b.Last, b.LastTime
	}
	a.N = n
	return a
}

func (s *folderSource) Bins(gauge int) []Bin { return s.series[gauge].bins }

func (s *folderSource) Ambient(i int) []AmbientSample {
	if i >= len(s.probes) {
		return nil
	}
	return s.probes[i].out
}

// each calls f with every reading in [from, to].
func (s *folderSource) each(from, to int64, f func(gauge int, t, value int64)) error {
	if from == 0 && to == 0 {
		to = 1 // the reader takes 0, 0 for everything
	}
	r := s.folder.Read(segment.ReadOptions{Gauges: s.names, From: from, To: to})
	defer r.Close()
	for {
		b, err := r.Next()
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return fmt.Errorf("read %s: %w", segment.ReadingsDir, err)
		}
		o := 0
		others := func(upTo int) {
			for ; o < len(b.Others) && b.OtherAt[o] <= upTo; o++ {
				if rec := &b.Others[o]; rec.Kind == segment.Indication {
					for g, name := range s.names {
						if name == rec.Name {
							f(g, rec.Time, toMicro(rec.MM))
						}
					}
				}
			}
		}
		for i, g := range b.Gauge {
			if len(b.Others) > 0 {
				others(i)
			}
			if int(g) < len(s.names) {
				f(int(g), b.Time[i], b.Micro[i])
			}
		}
		others(math.MaxInt)
	}
}

func (s *folderSource) Window(from, to int64) ([][]Sample, error) {
	out := make([][]Sample, len(s.names))
	err := s.each(from, to, func(g int, t, v int64) { out[g] = append(out[g], Sample{t, mm(v)}) })
	if err != nil {
		return nil, err
	}
	for g := range out {
		less := func(i, j int) bool { return out[g][i].Time < out[g][j].Time }
		if !sort.SliceIsSorted(out[g], less) {
			sort.SliceStable(out[g], less)
		}
	}
	return out, nil
}

func (s *folderSource) Fine(edges []int64) ([][]Bin, error) {
	out := make([][]Bin, len(s.names))
	if len(edges) < 2 {
		return out, nil
	}
	fine := make([]*fineBins, len(s.names))
	for g := range fine {
		fine[g] = newFineBins(s.rig.Gauges[g].Resolution.Value, edges)
	}
	err := s.each(edges[0], edges[len(edges)-1]-1, func(g int, t, v int64) { fine[g].add(t, v) })
	if err != nil {
		return nil, err
	}
	for g := range fine {
		out[g] = fine[g].close()
	}
	return out, nil
}
