package fetch

import (
	"cmp"
	"errors"
	"fmt"
	"slices"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// layer lays points down in a run folder: readings as they come, marks and
// events at the end, for they are few.
type layer struct {
	fs            segment.FS
	header        segment.Header
	fill          *segment.Filler
	progress      func(int64)
	s             *Summary
	before        string // the measurement before
	last          int64  // the latest instant
	shown         segment.Shown
	marks, events []segment.Entry
}

// Fetched is the kind of the event that says that a run was read back.
const Fetched = "fetched"

// mostEntries bounds what is kept of marks and events in memory.
const mostEntries = 2_000_000

func (l *layer) take(p *point) error {
	if p.at <= 0 || len(p.fields) == 0 {
		return fmt.Errorf("the server gives back a point of %s without an instant or a value", p.measurement)
	}
	defer l.tell()
	l.last = max(l.last, p.at)
	if p.measurement != "indication" && p.measurement != "ambient" {
		return l.entry(p)
	}
	l.s.Readings++
	if p.measurement != l.before {
		// Time goes back to the beginning with each measurement.
		if err := l.fill.Roll(); err != nil {
			return err
		}
		l.before = p.measurement
	}
	if p.measurement == "indication" && len(p.tags) == 1 && len(p.fields) == 1 {
		if mm, ok := p.fields[0].value.(float64); ok && p.fields[0].key == "mm" && p.tags[0].key == "gauge" {
			l.shown = segment.Shown{Gauge: p.tags[0].value, MM: mm, Time: p.at}
			return l.fill.Put(p.at, func(w *segment.Writer) error { return w.Indication(&l.shown) })
		}
	}
	return l.fill.Put(p.at, func(w *segment.Writer) error { return w.Append(p.segment(), p.at) })
}

// tell says how far it is, now and then.
func (l *layer) tell() {
	if n := l.s.Readings + l.s.Marks + l.s.Events; l.progress != nil && n%4096 == 0 {
		l.progress(n)
	}
}

// entry keeps a mark or an event.
func (l *layer) entry(p *point) error {
	e := segment.Entry{Point: p.segment(), Time: p.at}
	if err := needsWords(p); err != nil {
		return err
	}
	if p.measurement == "event" {
		l.s.Events++
		l.events = append(l.events, e)
	} else {
		l.s.Marks++
		l.marks = append(l.marks, e)
	}
	if len(l.marks)+len(l.events) > mostEntries {
		return fmt.Errorf("the server gives back more than %d marks and events, which no run holds", mostEntries)
	}
	return nil
}

// needsWords refuses an entry whose words are gone and matter to the figures.
func needsWords(p *point) error {
	words := map[string]string{"withdraw": "id", "touch": "act"}[p.measurement]
	if words == "" || slices.ContainsFunc(p.fields, func(f field) bool { return f.key == words }) {
		return nil
	}
	what := map[string]string{"withdraw": "a mark of this run was withdrawn", "touch": "a gauge was touched during this run"}[p.measurement]
	return config.Problem{What: what + ", and this server holds no words to say which or how", Fix: "analyse the run's folder, or forward to a server that holds words"}
}

// segment is the point in the form of the run folder.
func (p *point) segment() *segment.Point {
	out := &segment.Point{Measurement: p.measurement}
	for _, t := range p.tags {
		out.Tags = append(out.Tags, segment.Tag{Key: t.key, Value: t.value})
	}
	slices.SortFunc(out.Tags, func(a, b segment.Tag) int {
		if a.Key < b.Key {
			return -1
		}
		return 1
	})
	for _, f := range p.fields {
		out.Fields = append(out.Fields, segment.Field{Key: f.key, Value: f.value})
	}
	return out
}

func (l *layer) file(name string, b []byte) error {
	f, err := l.fs.Create(name)
	if err != nil {
		return err
	}
	_, err = f.Write(b)
	return errors.Join(err, f.Sync(), f.Close())
}

// close writes the logs and seals everything. That the run was read back stands
// among its events, with what did not come back.
func (l *layer) close() error {
	words := "read back from a server"
	if l.s.Lost != "" {
		words += ": " + l.s.Lost
	}
	l.events = append(l.events, segment.Entry{Time: l.last, Point: &segment.Point{Measurement: "event",
		Tags: []segment.Tag{{Key: "kind", Value: Fetched}}, Fields: []segment.Field{{Key: "detail", Value: words}, {Key: "n", Value: int64(1)}}}})
	names := []string{segment.RigFile}
	for _, log := range []struct {
		name    string
		entries []segment.Entry
	}{{segment.MarksFile, l.marks}, {segment.EventsFile, l.events}} {
		if len(log.entries) == 0 {
			continue
		}
		if err := l.log(log.name, log.entries); err != nil {
			return err
		}
		names = append(names, log.name)
	}
	return l.fill.Seal(names...)
}

// mostInBlock is how many entries go into a log at once.
const mostInBlock = 4096

func (l *layer) log(name string, entries []segment.Entry) error {
	slices.SortStableFunc(entries, func(a, b segment.Entry) int { return cmp.Compare(a.Time, b.Time) })
	h := l.header
	h.Clock = segment.ClockState{Wall: entries[0].Time, Given: true}
	log, err := segment.OpenLog(l.fs, name, h)
	if err != nil {
		return err
	}
	for part := range slices.Chunk(entries, mostInBlock) {
		if err := log.Append(segment.ClockState{Wall: part[len(part)-1].Time, Given: true}, part...); err != nil {
			return err
		}
	}
	return nil
}
