package importer

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// entry is one mark to be written.
type entry struct {
	at                         int64
	load                       string
	weight                     *config.Weight
	step, gauge, act, note, by string
}

// readMarks reads a CSV of marks: columns time (or time_utc), load, value,
// step, gauge, act, note and by, of which only the time must be there.
func readMarks(file string, r io.Reader, rig *config.Rig, m *Mapping, cal calendar) ([]entry, error) {
	t, err := openRows(file, r, m)
	if err != nil {
		return nil, err
	}
	column := map[string]int{}
	for i, h := range t.header {
		column[strings.ToLower(strings.TrimSpace(h))] = i
	}
	at := func(names ...string) int {
		for _, n := range names {
			if i, ok := column[n]; ok {
				return i
			}
		}
		return -1
	}
	when := at("time_utc", "time", "timestamp")
	if when < 0 {
		return nil, config.Problem{File: file, Line: 1, What: "there is no column time", Fix: "its columns are time, load, value, step, gauge, act, note, by"}
	}
	cal.span = nil
	var out []entry
	var problems config.Problems
	for {
		cells, line, err := t.next()
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, err
		}
		get := func(name string) string { return cell(cells, at(name)) }
		e := entry{load: get("load"), step: get("step"), gauge: get("gauge"), act: get("act"), note: get("note"), by: get("by")}
		e.at, err = cal.parse(cell(cells, when))
		if err == nil {
			err = e.check(rig, get("value"), t.comma)
		}
		if err != nil {
			problems = append(problems, config.Problem{File: file, Line: line, What: err.Error(), Fix: "mend the row, or take it out"})
			if len(problems) == mostProblems {
				break
			}
			continue
		}
		out = append(out, e)
	}
	return out, problems.Err()
}

// check refuses a mark that the rig does not know or that says nothing.
func (e *entry) check(rig *config.Rig, value string, comma bool) error {
	if e.load != "" {
		if !slices.ContainsFunc(rig.Loads, func(l config.Load) bool { return l.Name == e.load }) {
			return fmt.Errorf("the rig has no load %q", e.load)
		}
		text, err := weightText(value, "", comma)
		if err != nil {
			return err
		}
		w, err := config.ParseWeight(text)
		if err != nil {
			return err
		}
		e.weight = &w
	}
	if e.gauge != "" && !slices.ContainsFunc(rig.Gauges, func(g config.Gauge) bool { return g.Name == e.gauge }) {
		return fmt.Errorf("the rig has no gauge %q", e.gauge)
	}
	if (e.gauge == "") != (e.act == "") {
		return errors.New("an act needs its gauge, and a gauge its act")
	}
	if e.act != "" && !slices.Contains(ingest.Acts, e.act) {
		return fmt.Errorf("act %q is none of %s", e.act, strings.Join(ingest.Acts, ", "))
	}
	if e.load == "" && e.step == "" && e.act == "" && e.note == "" {
		return errors.New("the row says nothing: give a load, a step, an act or a note")
	}
	return nil
}

// writeMarks lays marks.lp down. Rows of one instant and step are one mark.
func writeMarks(fsys segment.FS, h segment.Header, list []entry, gravity float64) error {
	if len(list) == 0 {
		return nil
	}
	slices.SortStableFunc(list, func(a, b entry) int {
		switch {
		case a.at < b.at:
			return -1
		case a.at > b.at:
			return 1
		}
		return 0
	})
	log, err := segment.OpenLog(fsys, segment.MarksFile, h)
	if err != nil {
		return err
	}
	var entries []segment.Entry
	n := 0
	for i := range list {
		e := &list[i]
		if i == 0 || list[i-1].at != e.at || list[i-1].step != e.step {
			n++
		}
		entries = append(entries, segment.Entry{Point: e.point(fmt.Sprintf("m%d", n), gravity), Time: e.at})
	}
	return log.Append(segment.ClockState{Wall: list[len(list)-1].at, Given: true}, entries...)
}

// point is the entry as a line of marks.lp.
func (e *entry) point(id string, gravity float64) *segment.Point {
	one := segment.Field{Key: "n", Value: int64(1)}
	by, ident := segment.Field{Key: "by", Value: plain(e.by)}, segment.Field{Key: "id", Value: id}
	switch {
	case e.load != "":
		p := &segment.Point{Measurement: "load", Tags: []segment.Tag{{Key: "name", Value: e.load}}, Fields: []segment.Field{by, ident}}
		newton := 0.0
		if e.weight.Mass != nil {
			p.Fields = append(p.Fields, segment.Field{Key: "kilogram", Value: e.weight.Mass.Value})
			newton = e.weight.Mass.Value * gravity
		} else {
			newton = e.weight.Force.Value
		}
		p.Fields = append(p.Fields, segment.Field{Key: "newton", Value: newton}, segment.Field{Key: "shown", Value: plain(e.weight.Shown)})
		if e.step != "" {
			p.Fields = append(p.Fields, segment.Field{Key: "step", Value: plain(e.step)})
		}
		return p
	case e.act != "":
		return &segment.Point{Measurement: "touch", Tags: []segment.Tag{{Key: "gauge", Value: e.gauge}},
			Fields: []segment.Field{{Key: "act", Value: e.act}, by, ident, one}}
	case e.step != "":
		return &segment.Point{Measurement: "step", Fields: []segment.Field{by, ident, one, {Key: "name", Value: plain(e.step)}}}
	}
	return &segment.Point{Measurement: "note", Fields: []segment.Field{by, ident, one, {Key: "text", Value: plain(e.note)}}}
}

// plain makes a text that every line-protocol server takes: control characters
// become blanks, and a last backslash gets a blank behind it.
func plain(s string) string {
	s = strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(s, "\uFFFD"))
	if strings.HasSuffix(s, `\`) {
		s += " "
	}
	return s
}
