package importer

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"gaugelog/config"
)

// reading is one cell placed: an indication, or a probe's reading where probe
// is set (index+1 into the sheet's names).
type reading struct {
	name      string
	probe     bool
	mm, shown float64
	unit      string
	status    string
	celsius   float64
	humidity  float64
	at        int64
}

// placer turns rows into readings and load changes.
type placer struct {
	file  string
	rig   *config.Rig
	s     *sheet
	m     *Mapping
	cal   calendar
	comma bool
	// last holds, by gauge or probe, the instant and the line of its last row.
	last map[string]seen
	// unsorted lets rows go back in time: where they are to be sorted, and in a
	// table of our own, which keeps the order of recording.
	unsorted bool
	loads    map[string]string
	marks    []entry
	out      []reading
}

type seen struct {
	at   int64
	line int
}

// row places one row. The readings are valid until the next call.
func (p *placer) row(cells []string, line int) ([]reading, error) {
	bad := func(err error, fix string) error {
		return config.Problem{File: p.file, Line: line, What: err.Error(), Fix: fix}
	}
	var when []string
	for _, c := range p.s.time {
		when = append(when, cell(cells, c))
	}
	at, err := p.cal.parse(strings.Join(when, " "))
	if err != nil {
		return nil, bad(err, "mend the cell, or take the row out")
	}
	p.out = p.out[:0]
	var errs []error
	if p.s.name >= 0 {
		errs = append(errs, p.long(cells, at))
	}
	for _, g := range p.s.gauges {
		errs = append(errs, p.indication(g.name, cell(cells, g.column), g.unit, cell(cells, statusOf(p.s, g.column)), at))
	}
	errs = append(errs, p.ambient(cells, at))
	for _, l := range p.s.loads {
		errs = append(errs, p.load(l, cell(cells, l.column), at))
	}
	if err := errors.Join(errs...); err != nil {
		return nil, bad(errors.New(strings.ReplaceAll(err.Error(), "\n", "; ")), "mend the cell, empty it, or name texts that stand for no reading: --missing TEXT")
	}
	return p.out, p.order(line)
}

func statusOf(s *sheet, column int) int {
	if k, ok := s.status[column]; ok {
		return k
	}
	return -1
}

// order refuses a reading that lies at or before the last of the same gauge.
func (p *placer) order(line int) error {
	for _, r := range p.out {
		before, ok := p.last[r.name]
		p.last[r.name] = seen{r.at, line} // one message a jump back, not one a row behind it
		switch {
		case ok && before.at == r.at:
			return config.Problem{File: p.file, Line: line,
				What: fmt.Sprintf("%s has a reading of the same instant in row %d", r.name, before.line),
				Fix:  "give the instants to the second or finer, or take one row out"}
		case ok && before.at > r.at && !p.unsorted:
			return config.Problem{File: p.file, Line: line,
				What: fmt.Sprintf("its time lies before that of row %d", before.line),
				Fix:  "mend the time, or give --sort if the rows are in another order on purpose"}
		}
	}
	return nil
}

// missing tells whether a cell stands for no reading.
func (p *placer) missing(text string) bool { return text == "" || slices.Contains(p.m.Missing, text) }

func (p *placer) indication(gauge, text, unit, status string, at int64) error {
	if p.missing(text) {
		return nil
	}
	v, err := parseNumber(text, p.comma)
	if err != nil {
		return fmt.Errorf("%s: %w", gauge, err)
	}
	mm, err := millimetres(v, unit)
	if err != nil {
		return fmt.Errorf("%s: %w", gauge, err)
	}
	r := reading{name: gauge, mm: mm, status: status, at: at}
	if lengths[unit].Cmp(lengths["mm"]) != 0 {
		r.shown, _ = v.Float64()
		r.unit = plainUnit(unit)
	}
	p.out = append(p.out, r)
	return nil
}

// plainUnit is the one way a unit is written in a run folder.
func plainUnit(unit string) string {
	switch unit {
	case "inch", "inches", `"`:
		return "in"
	case "µm", "μm":
		return "um"
	}
	return unit
}

// long places a row that holds one reading.
func (p *placer) long(cells []string, at int64) error {
	name := cell(cells, p.s.name)
	gauge := slices.ContainsFunc(p.rig.Gauges, func(g config.Gauge) bool { return g.Name == name })
	probe := slices.ContainsFunc(p.rig.Probes, func(g config.Probe) bool { return g.Name == name })
	if !gauge && !probe {
		return fmt.Errorf("the rig has no gauge or probe %q", name)
	}
	if probe {
		r := reading{name: name, probe: true, celsius: math.NaN(), humidity: math.NaN(), at: at}
		return p.surroundings(r, cell(cells, p.s.longCelsius), cell(cells, p.s.longHumidity))
	}
	n := len(p.out)
	if err := p.indication(name, cell(cells, p.s.value), p.s.valueUnit, cell(cells, p.s.longStatus), at); err != nil || len(p.out) == n {
		return err
	}
	if text, unit := cell(cells, p.s.longShown), cell(cells, p.s.longUnit); text != "" && unit != "" {
		v, err := parseNumber(text, p.comma)
		if err != nil {
			return fmt.Errorf("shown: %w", err)
		}
		p.out[n].shown, _ = v.Float64()
		p.out[n].unit = unit
	}
	return nil
}

// ambient places the probes' cells of a wide row.
func (p *placer) ambient(cells []string, at int64) error {
	var errs []error
	humid := map[string]int{}
	for _, c := range p.s.humidity {
		humid[c.name] = c.column
	}
	for _, c := range p.s.celsius {
		k, ok := humid[c.name]
		if !ok {
			k = -1
		}
		delete(humid, c.name)
		errs = append(errs, p.surroundings(reading{name: c.name, probe: true, at: at}, cell(cells, c.column), cell(cells, k)))
	}
	for _, c := range p.s.humidity {
		if _, left := humid[c.name]; left {
			errs = append(errs, p.surroundings(reading{name: c.name, probe: true, at: at}, "", cell(cells, c.column)))
		}
	}
	return errors.Join(errs...)
}

func (p *placer) surroundings(r reading, celsius, humidity string) error {
	r.celsius, r.humidity = math.NaN(), math.NaN()
	for _, c := range []struct {
		text     string
		to       *float64
		from, up float64
		what     string
	}{{celsius, &r.celsius, -90, 200, "degree Celsius"}, {humidity, &r.humidity, 0, 100, "percent"}} {
		if p.missing(c.text) {
			continue
		}
		v, err := parseNumber(c.text, p.comma)
		if err != nil {
			return fmt.Errorf("%s: %w", r.name, err)
		}
		f, _ := v.Float64()
		if f < c.from || f > c.up {
			return fmt.Errorf("%s: %g %s cannot be", r.name, f, c.what)
		}
		*c.to = f
	}
	if !math.IsNaN(r.celsius) || !math.IsNaN(r.humidity) {
		p.out = append(p.out, r)
	}
	return nil
}

// load notes a load's value where it differs from the row before. A first value
// of nothing is no change.
func (p *placer) load(l loadColumn, text string, at int64) error {
	if p.missing(text) {
		return nil
	}
	value, err := weightText(text, l.unit, p.comma)
	if err != nil {
		return fmt.Errorf("load %s: %w", l.name, err)
	}
	w, err := config.ParseWeight(value)
	if err != nil {
		return fmt.Errorf("load %s: %w", l.name, err)
	}
	before, ok := p.loads[l.name]
	p.loads[l.name] = value
	zero := w.Mass != nil && w.Mass.Value == 0 || w.Force != nil && w.Force.Value == 0
	if ok && before == value || !ok && zero {
		return nil
	}
	p.marks = append(p.marks, entry{at: at, load: l.name, weight: &w})
	return nil
}

// weightText is a load's cell with its unit behind it.
func weightText(text, unit string, comma bool) (string, error) {
	if comma {
		text = strings.Replace(text, ",", ".", 1)
	}
	if plainDecimal(text) {
		if unit == "" {
			return "", fmt.Errorf("%q has no unit; put it into the header or the cell, such as 12.4 kg", text)
		}
		return text + " " + unit, nil
	}
	return text, nil
}
