package importer

import (
	"fmt"
	"slices"
	"sort"
	"strings"

	"gaugelog/config"
)

// resolver finds the columns of a mapping in a header.
type resolver struct {
	file     string
	rig      *config.Rig
	m        *Mapping
	heads    []heading
	used     []bool
	problems config.Problems
}

func (r *resolver) fail(what, fix string) {
	r.problems = append(r.problems, config.Problem{File: r.file, Line: 1, What: what, Fix: fix})
}

// find returns the column of a header, by its whole text first, then by its
// name without the unit; -1 where there is none.
func (r *resolver) find(name string) int {
	for _, same := range []func(heading) bool{
		func(h heading) bool { return h.text == name },
		func(h heading) bool { return strings.EqualFold(h.text, name) },
		func(h heading) bool { return strings.EqualFold(h.name, name) },
	} {
		for i, h := range r.heads {
			if same(h) {
				return i
			}
		}
	}
	return -1
}

// need is find for a column that was asked for.
func (r *resolver) need(what, name string) int {
	i := r.find(name)
	if i < 0 {
		var all []string
		for _, h := range r.heads {
			all = append(all, fmt.Sprintf("%q", h.text))
		}
		r.fail(fmt.Sprintf("there is no column %q for %s", name, what), "its columns are: "+strings.Join(all, ", "))
		return -1
	}
	if r.used[i] {
		r.fail(fmt.Sprintf("column %q is asked for twice, the second time for %s", name, what), "give each column once")
	}
	r.used[i] = true
	return i
}

// resolve finds every column the mapping names, and the obvious ones where it
// names none.
func resolve(file string, rig *config.Rig, m *Mapping, header []string) (*sheet, error) {
	r := &resolver{file: file, rig: rig, m: m, used: make([]bool, len(header))}
	for _, h := range header {
		r.heads = append(r.heads, headingOf(h))
	}
	s := &sheet{name: -1, value: -1, longCelsius: -1, longHumidity: -1, longStatus: -1, longShown: -1, longUnit: -1, status: map[int]int{}}
	r.instants(s)
	r.readings(s)
	r.surroundings(s)
	r.weights(s)
	for i, h := range r.heads {
		if !r.used[i] && h.text != "" && h.text != "seconds_s" {
			s.ignored = append(s.ignored, h.text)
		}
	}
	return s, r.problems.Err()
}

func (r *resolver) instants(s *sheet) {
	names := r.m.Time
	if len(names) == 0 {
		for _, n := range []string{"time_utc", "time", "timestamp", "datetime", "date_time", "date time"} {
			if i := r.find(n); i >= 0 {
				names = []string{r.heads[i].text}
				break
			}
		}
	}
	if len(names) == 0 {
		r.fail("no column of times is known", `name it: --time COLUMN (twice for a date and a time of day)`)
		return
	}
	for _, n := range names {
		i := r.need("the time", n)
		s.time = append(s.time, i)
		if i >= 0 && len(names) == 1 {
			if _, ok := spans[r.heads[i].unit]; ok {
				s.span = r.heads[i].unit
			}
		}
	}
	if s.span != "" && r.m.Start == "" {
		r.fail(fmt.Sprintf("column %q is a time that has passed, not an instant", names[0]), "say when 0 was: --start 2026-03-02T08:00:00Z")
	}
}

func (r *resolver) readings(s *sheet) {
	if r.m.Name == "" && len(r.m.Gauges) == 0 && r.find("name") >= 0 && r.find("indication_mm") >= 0 {
		r.m.Name, r.m.Value = "name", "indication_mm"
		for _, c := range []struct {
			to   *int
			name string
		}{{&s.longShown, "shown"}, {&s.longUnit, "unit"}, {&s.longStatus, "status"},
			{&s.longCelsius, "temperature_celsius"}, {&s.longHumidity, "humidity_percent"}} {
			if *c.to = r.find(c.name); *c.to >= 0 {
				r.used[*c.to] = true
			}
		}
	}
	if r.m.Name != "" || r.m.Value != "" {
		s.name, s.value = r.need("the gauges' names", r.m.Name), r.need("the values", r.m.Value)
		if s.value >= 0 {
			s.valueUnit = r.lengthUnit(s.value)
		}
		return
	}
	names := r.m.Gauges
	if len(names) == 0 {
		names = map[string]string{}
		for _, g := range r.rig.Gauges {
			if i := r.find(g.Name); i >= 0 {
				names[g.Name] = r.heads[i].text
			}
		}
	}
	if len(names) == 0 {
		r.fail("no column is named as a gauge of the rig", "say which is which: --gauge NAME=COLUMN; the rig has "+r.gaugeNames())
	}
	for _, g := range sorted(names) {
		if !slices.ContainsFunc(r.rig.Gauges, func(x config.Gauge) bool { return x.Name == g }) {
			r.fail(fmt.Sprintf("the rig has no gauge %q", g), "it has "+r.gaugeNames())
			continue
		}
		if i := r.need("gauge "+g, names[g]); i >= 0 {
			s.gauges = append(s.gauges, gaugeColumn{g, r.lengthUnit(i), i})
			if k := r.find(g + "_status"); k >= 0 && !r.used[k] {
				s.status[i], r.used[k] = k, true
			}
		}
	}
}

func (r *resolver) gaugeNames() string {
	var all []string
	for _, g := range r.rig.Gauges {
		all = append(all, g.Name)
	}
	return strings.Join(all, ", ")
}

// lengthUnit is the unit of a gauge's column.
func (r *resolver) lengthUnit(i int) string {
	u := r.heads[i].unit
	if u == "" {
		u = r.m.Unit
	}
	if u == "" {
		r.fail(fmt.Sprintf("column %q names no unit", r.heads[i].text), `put it into the header, such as "mid [mm]", or give --unit mm`)
		return "mm"
	}
	if _, ok := lengths[u]; !ok {
		r.fail(fmt.Sprintf("column %q is in %q, which is no length", r.heads[i].text, u), "use mm, cm, um or in")
	}
	return u
}

func (r *resolver) surroundings(s *sheet) {
	names := r.m.Probes
	if len(names) == 0 {
		names = map[string]Probe{}
		for _, p := range r.rig.Probes {
			var x Probe
			if i := r.find(p.Name + "_celsius"); i >= 0 {
				x.Temperature = r.heads[i].text
			}
			if i := r.find(p.Name + "_percent"); i >= 0 {
				x.Humidity = r.heads[i].text
			}
			names[p.Name] = x
		}
	}
	for _, n := range sorted(names) {
		if !slices.ContainsFunc(r.rig.Probes, func(x config.Probe) bool { return x.Name == n }) {
			r.fail(fmt.Sprintf("the rig has no probe %q", n), "name the rig's probes, or add it to the rig file")
			continue
		}
		if p := names[n]; p.Temperature != "" {
			s.celsius = append(s.celsius, probeColumn{n, r.need("the temperature of "+n, p.Temperature)})
		}
		if p := names[n]; p.Humidity != "" {
			s.humidity = append(s.humidity, probeColumn{n, r.need("the humidity of "+n, p.Humidity)})
		}
	}
}

func (r *resolver) weights(s *sheet) {
	for _, n := range sorted(r.m.Loads) {
		if !slices.ContainsFunc(r.rig.Loads, func(x config.Load) bool { return x.Name == n }) {
			r.fail(fmt.Sprintf("the rig has no load %q", n), "name the rig's loads")
			continue
		}
		if i := r.need("load "+n, r.m.Loads[n]); i >= 0 {
			u := r.heads[i].unit
			if u == "" {
				u = r.m.LoadUnit
			}
			s.loads = append(s.loads, loadColumn{n, u, i})
		}
	}
}

func sorted[T any](m map[string]T) []string {
	var names []string
	for n := range m {
		names = append(names, n)
	}
	sort.Strings(names)
	return names
}
