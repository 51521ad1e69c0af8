package history

import (
	"fmt"
	"slices"
	"sort"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// tolerance is by how much a reading may stand behind a younger one before the
// disorder is told of: a recorder stores what it recalls from memory, after a
// jump or a late mark, behind what it had stored already.
const tolerance = 30 * 60 * second

// recallSlack is what a recorder holds in memory beyond the time around a
// change, with a margin.
const recallSlack = 10 * 60 * second

// folderSource is a Source over a run folder. It keeps bins only; single
// readings are read again when asked for.
type folderSource struct {
	folder      *segment.Folder
	rig         *config.Rig
	names       []string // of the gauges, in the rig's order
	resolutions []float64
	numbers     map[string]int
	grid        grid
	tolerance   int64
	bins        [][]Bin
	probes      []probe
}

func newFolderSource(folder *segment.Folder, rig *config.Rig, width int64) *folderSource {
	s := &folderSource{folder: folder, rig: rig, grid: grid{width: width}, numbers: map[string]int{}, tolerance: tolerance}
	for i, g := range rig.Gauges {
		s.names = append(s.names, g.Name)
		s.resolutions = append(s.resolutions, g.Resolution.Value)
		s.numbers[g.Name] = i
	}
	if around := rig.Record.Sampling.Around; around != nil {
		s.tolerance = max(s.tolerance, int64(around.Value*1e9)+recallSlack)
	}
	s.probes = make([]probe, len(rig.Probes))
	for i := range s.probes {
		s.probes[i].width = max(width, 60*second)
	}
	return s
}

// pass goes over all readings once, and over what stood too far behind again.
func (s *folderSource) pass(h *History) error {
	gathers, report, err := s.count(segment.ReadOptions{}, &s.grid, s.tolerance, h.unknownGauges(), func(rec *segment.Record) { s.take(h, rec) })
	if err != nil {
		return err
	}
	h.noteReport(report)
	h.damage = report.Damage
	h.GaugeReadings = make([]int64, len(gathers))
	for i, g := range gathers {
		if g.n == 0 {
			continue
		}
		h.GaugeReadings[i] = g.n
		if h.Readings == 0 || g.first < h.First {
			h.First = g.first
		}
		if h.Readings == 0 || g.last > h.Last {
			h.Last = g.last
		}
		h.Readings += g.n
		h.noteGathered(s.rig.Gauges[i], g)
	}
	h.noteUnknown()
	s.bins, err = s.settled(gathers, &s.grid)
	for i := range s.probes {
		s.probes[i].finish()
	}
	return err
}

// noteGathered notes what one gauge's readings were not.
func (h *History) noteGathered(g config.Gauge, of *gather) {
	if of.inexact {
		h.Notes = append(h.Notes, notMultiple(g))
	}
	if n := max(of.behind, of.farther); n > 0 {
		h.Notes = append(h.Notes, Note{Code: "out-of-order", Gauge: g.Name, Text: fmt.Sprintf(
			"at least %d readings of gauge %s stand out of the order of time; they were put in order", n, g.Name)})
	}
}

func (h *History) unknownGauges() map[string]int64 {
	h.unknown = map[string]int64{}
	return h.unknown
}

func (h *History) noteUnknown() {
	var names []string
	for n := range h.unknown {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		h.Notes = append(h.Notes, Note{Code: "unknown-gauge", Gauge: n, Text: fmt.Sprintf(
			"the readings hold %d of a gauge %q that the rig file does not name; they were left out", h.unknown[n], n)})
	}
}

// take handles a line that is no indication.
func (s *folderSource) take(h *History, rec *segment.Record) {
	switch rec.Kind {
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

// count puts the readings that the options choose into the bins of a grid, by
// gauge. Readings of gauges that the rig does not name are counted in strangers,
// lines that are no indications are handed to others in their order; both may
// be nil. Bins stay open for readings that stand tolerance behind younger ones.
func (s *folderSource) count(opts segment.ReadOptions, g *grid, tolerance int64, strangers map[string]int64, others func(*segment.Record)) ([]*gather, *segment.Report, error) {
	opts.Gauges = s.names
	r := s.folder.Read(opts)
	defer r.Close()
	gathers := make([]*gather, len(s.names))
	for i := range gathers {
		gathers[i] = newGather(tolerance + g.width)
	}
	work := func(b *segment.Batch, c **counts) {
		if *c == nil {
			*c = newCounts(s.resolutions, g, tolerance)
		}
		(*c).begin()
		row := 0
		for i := range b.Others {
			rec := &b.Others[i]
			n, known := s.numbers[rec.Name]
			if rec.Kind != segment.Indication || !known {
				continue
			}
			at := b.OtherAt[i] // in the order of the file
			(*c).rows(b.Gauge[row:at], b.Micro[row:at], b.Time[row:at])
			row = at
			(*c).converted(n, rec.Time, toMicro(rec.MM), otherUnit(rec))
		}
		(*c).rows(b.Gauge[row:], b.Micro[row:], b.Time[row:])
		(*c).finish()
	}
	collect := func(b *segment.Batch, c **counts) error {
		start := 0
		for i := range (*c).parts {
			p := &(*c).parts[i]
			gathers[p.gauge].take(p, (*c).tallies[start:p.tallies], b.Foreign, tolerance)
			start = p.tallies
		}
		for _, g := range gathers {
			g.settle(false)
		}
		for i, n := range (*c).strangers {
			if n > 0 && strangers != nil {
				strangers[r.Gauges()[len(s.names)+i]] += n
			}
		}
		for i := range b.Others {
			rec := &b.Others[i]
			if rec.Kind != segment.Indication {
				if others != nil {
					others(rec)
				}
			} else if _, known := s.numbers[rec.Name]; !known && strangers != nil {
				strangers[rec.Name]++
			}
		}
		return nil
	}
	if err := segment.Fold(r, work, collect); err != nil {
		return nil, nil, fmt.Errorf("read %s: %w", segment.ReadingsDir, err)
	}
	return gathers, r.Report(), nil
}

// otherUnit says that the gauge showed an indication in another unit than mm.
func otherUnit(rec *segment.Record) bool {
	if rec.Point == nil {
		return false
	}
	for _, f := range rec.Point.Fields {
		if f.Key == "unit" {
			return f.Value != "mm"
		}
	}
	return false
}

// settled closes all bins, by gauge. Bins of which readings came after they
// were closed are counted again, in a pass of their own that holds them all
// open.
func (s *folderSource) settled(gathers []*gather, g *grid) ([][]Bin, error) {
	out := make([][]Bin, len(gathers))
	again := grid{width: g.width, edges: g.edges, only: make([]map[int64]bool, len(gathers))}
	var from, to int64
	found := false
	for i, v := range gathers {
		out[i] = v.bins()
		again.only[i] = v.late
		for start := range v.late {
			_, end, _ := g.bin(i, start)
			if !found {
				from, to, found = start, end, true
			}
			from, to = min(from, start), max(to, end)
		}
	}
	if !found {
		return out, nil
	}
	const never = int64(1) << 62
	more, _, err := s.count(between(from, to-1), &again, never, nil, nil)
	if err != nil {
		return nil, err
	}
	for i, v := range more {
		if len(v.late) > 0 {
			panic("history: a bin was closed too early") // nothing is older than the horizon
		}
		if b := v.bins(); len(b) > 0 {
			out[i] = replace(out[i], b)
		}
	}
	return out, nil
}

// between are the options that choose [from, to]; the reader takes 0, 0 for
// everything.
func between(from, to int64) segment.ReadOptions {
	if from == 0 && to == 0 {
		to = 1
	}
	return segment.ReadOptions{From: from, To: to}
}

func (s *folderSource) Bins(gauge int) []Bin { return s.bins[gauge] }

func (s *folderSource) Ambient(i int) []AmbientSample {
	if i >= len(s.probes) {
		return nil
	}
	return s.probes[i].out
}

func (s *folderSource) Fine(edges []int64) ([][]Bin, error) {
	if len(edges) < 2 {
		return make([][]Bin, len(s.names)), nil
	}
	g := &grid{edges: slices.Clone(edges)}
	gathers, _, err := s.count(between(edges[0], edges[len(edges)-1]-1), g, s.tolerance, nil, nil)
	if err != nil {
		return nil, err
	}
	return s.settled(gathers, g)
}
