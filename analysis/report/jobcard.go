package report

import (
	"cmp"
	"fmt"
	"math"
	"strings"
	"time"

	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
)

// jobCard says what hung where: specimen, supports, gauges, loads.
func (b *builder) jobCard() Section {
	s := Section{ID: "job", Title: "What was tested"}
	if b.rig == nil {
		s.Blocks = append(s.Blocks, Paragraph{"The rig file is not at hand; the result names only what was measured."})
		return s
	}
	s.Blocks = append(s.Blocks, b.specimenTable(), b.placesTable(), b.gaugeTable())
	if l := b.calibrations(); len(l) > 0 {
		s.Blocks = append(s.Blocks, List{Grave: true, Items: l})
	}
	return s
}

func (b *builder) specimenTable() Table {
	g := b.rig
	recorded := "As recorded"
	if b.u == "us" {
		recorded += ", in US units"
	}
	t := Table{Caption: "Specimen and test", Columns: []Column{{Name: "Item", Text: true}, {Name: recorded, Text: true}}}
	add := func(k, v string) {
		if v != "" {
			t.Rows = append(t.Rows, []string{k, v})
		}
	}
	add("Specimen", g.Specimen.Name)
	add("Material", g.Specimen.Material)
	add("Section", sectionWords(g.Specimen.Section))
	add("Length", shown(g.Specimen.Length))
	if g.Specimen.Mass != nil {
		add("Mass", unitsystem.Typed(g.Specimen.Mass.Shown))
	}
	add("Test", g.Test.ID)
	add("Purpose", g.Test.Purpose)
	add("Operator", g.Test.Operator)
	for _, d := range g.Details {
		add(d.Name, d.Text)
	}
	add("Gravity", b.with(&b.r.Run.Gravity))
	return t
}

func sectionWords(s config.Section) string {
	parts := []string{s.Shape}
	for _, d := range []struct {
		name string
		list []config.Length
	}{{"width", s.Width}, {"depth", s.Depth}, {"diameter", s.Diameter}, {"wall", s.Wall}} {
		if len(d.list) == 0 {
			continue
		}
		var places []string
		for _, l := range d.list {
			places = append(places, shown(l))
		}
		parts = append(parts, d.name+" "+strings.Join(places, ", ")+spread(d.list))
	}
	if s.SecondMoment != nil {
		parts = append(parts, "second moment of area "+unitsystem.Typed(s.SecondMoment.Shown))
	}
	if s.U != nil {
		parts = append(parts, "each with u = "+shown(*s.U))
	}
	return strings.Join(parts, "; ")
}

// spread is the mean and the range of a dimension measured at several places.
func spread(list []config.Length) string {
	if len(list) < 2 {
		return ""
	}
	least, most, sum := math.Inf(1), math.Inf(-1), 0.0
	for _, l := range list {
		least, most, sum = math.Min(least, l.Value), math.Max(most, l.Value), sum+l.Value
	}
	return fmt.Sprintf(" (mean %.3f\u202fmm, range %.3f\u202fmm)", sum/float64(len(list)), most-least)
}

func (b *builder) placesTable() Table {
	t := Table{Caption: "Supports and loads", Columns: []Column{{Name: "What", Text: true}, {Name: "Name", Text: true}, {Name: "At", Text: true}, {Name: "Kind", Text: true}}}
	for _, s := range b.rig.Supports {
		t.Rows = append(t.Rows, []string{"support", s.Name, shown(s.At), s.Kind})
	}
	for _, l := range b.rig.Loads {
		at, kind := "", "at a place"
		switch {
		case l.At != nil:
			at = shown(*l.At)
		case l.From != nil && l.To != nil:
			at, kind = shown(*l.From)+" to "+shown(*l.To), "spread evenly"
		}
		t.Rows = append(t.Rows, []string{"load", l.Name, at, kind})
	}
	t.Says = "Places are along the beam from the rig's datum."
	return t
}

// shown is the text of the rig file, or the value where it was a default, to
// come out in the report's units.
func shown(l config.Length) string {
	if l.Shown != "" {
		return unitsystem.Typed(l.Shown)
	}
	return fmt.Sprintf("%g\u202fmm", l.Value)
}

func (b *builder) gaugeTable() Table {
	t := Table{Caption: "Gauges", Columns: []Column{
		{Name: "Gauge", Text: true}, {Name: "At", Text: true}, {Name: "Sees", Text: true}, {Name: "Resolution", Text: true},
		{Name: "Serial number", Text: true}, {Name: "Calibrated", Text: true}, {Name: "Due", Text: true}}}
	for _, g := range b.rig.Gauges {
		date, due := "not stated", "not stated"
		if c := g.Calibration; c != nil {
			if c.Date != "" {
				date = c.Date
			}
			if c.Due != "" {
				due = c.Due
			}
		}
		t.Rows = append(t.Rows, []string{g.Name, shown(g.At), g.Sees, shown(g.Resolution), cmp.Or(g.SerialNumber, "not stated"), date, due})
	}
	t.Says = "Resolution is the gauge's smallest step. Calibration dates are the rig file's, held against the last reading."
	return t
}

// nearDue is how long before its end a calibration is told of.
const nearDue = 30 * 24 * time.Hour

// calibrations tells which calibrations had run out by the last reading, and
// which were about to; never by the clock, so that a report stays the same.
func (b *builder) calibrations() []string {
	last, err := time.Parse(time.RFC3339Nano, b.r.Run.Last)
	if err != nil {
		return nil
	}
	first, err := time.Parse(time.RFC3339Nano, b.r.Run.First)
	if err != nil {
		first = last
	}
	var out, without []string
	for _, g := range b.rig.Gauges {
		if g.Calibration == nil {
			without = append(without, g.Name)
			continue
		}
		due, err := time.ParseInLocation(time.DateOnly, g.Calibration.Due, b.zone)
		if err != nil {
			continue
		}
		end := due.AddDate(0, 0, 1) // the day it is due still counts
		switch {
		case !first.Before(end):
			out = append(out, fmt.Sprintf("The calibration of gauge %s had run out on %s, before the first reading.", g.Name, g.Calibration.Due))
		case !last.Before(end):
			out = append(out, fmt.Sprintf("The calibration of gauge %s ran out on %s, during the test.", g.Name, g.Calibration.Due))
		case end.Sub(last) <= nearDue:
			out = append(out, fmt.Sprintf("The calibration of gauge %s is due on %s, %d days after the last reading.", g.Name, g.Calibration.Due, int(end.Sub(last).Hours()/24)))
		}
	}
	if len(without) > 0 {
		out = append(out, "No calibration is stated for "+strings.Join(without, ", ")+": their readings are taken as they are.")
	}
	return out
}
