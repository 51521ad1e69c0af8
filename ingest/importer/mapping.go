package importer

import (
	"bytes"
	"errors"
	"io"
	"slices"
	"strings"

	"go.yaml.in/yaml/v3"

	"gaugelog/config"
)

// Probe names the columns of one probe, either may be empty.
type Probe struct {
	Temperature string `yaml:"temperature"`
	Humidity    string `yaml:"humidity"`
}

// Mapping says which column is what. A file of the same keys is a mapping too.
type Mapping struct {
	// Time names the column of instants, or several whose texts together give
	// one, such as a date and a time of day.
	Time Columns `yaml:"time"`
	// Gauges, Probes and Loads name columns by the rig's names.
	Gauges map[string]string `yaml:"gauges"`
	Probes map[string]Probe  `yaml:"probes"`
	Loads  map[string]string `yaml:"loads"`
	// Unit is the unit of the gauges' columns whose header names none: mm, cm,
	// um or in. LoadUnit is the same for loads.
	Unit     string `yaml:"unit"`
	LoadUnit string `yaml:"load_unit"`
	// Name and Value are for files with one reading a row: the column of the
	// gauge's name and that of the value.
	Name  string `yaml:"name"`
	Value string `yaml:"value"`
	// Start is the instant of 0 where the time column holds elapsed time.
	Start string `yaml:"start"`
	// Zone is the time zone of instants that name none; the rig's by default.
	Zone string `yaml:"zone"`
	// Dates is day-first or month-first, for dates written 03/04/2026.
	Dates string `yaml:"dates"`
	// Decimal is comma or point; by default a comma is taken for a decimal one
	// where it does not separate the columns.
	Decimal string `yaml:"decimal"`
	// Missing are texts that stand for no reading; an empty cell always does.
	Missing []string `yaml:"missing"`
}

// ParseMapping reads a mapping file; an unknown key is an error.
func ParseMapping(name string, text []byte) (Mapping, error) {
	var m Mapping
	d := yaml.NewDecoder(bytes.NewReader(text))
	d.KnownFields(true)
	if err := d.Decode(&m); err != nil && !errors.Is(err, io.EOF) {
		return Mapping{}, config.Problem{File: name, What: strings.TrimPrefix(err.Error(), "yaml: "),
			Fix: "its keys are time, gauges, probes, loads, unit, load_unit, name, value, start, zone, dates, decimal, missing"}
	}
	return m, nil
}

// Columns names one column or several: in a file, a text or a list of texts.
type Columns []string

// UnmarshalYAML takes either form.
func (c *Columns) UnmarshalYAML(n *yaml.Node) error {
	if n.Kind == yaml.ScalarNode {
		*c = Columns{n.Value}
		return nil
	}
	var list []string
	if err := n.Decode(&list); err != nil {
		return err
	}
	*c = list
	return nil
}

// heading is a column's header taken apart: "mid [mm]", "mid (in)", "mid_mm",
// "mid / mm", "mid mm" all are mid with a unit.
type heading struct{ text, name, unit string }

func headingOf(text string) heading {
	text = strings.TrimSpace(strings.TrimPrefix(text, "\ufeff"))
	h := heading{text: text, name: text}
	for _, pair := range []string{"[]", "()"} {
		if a := strings.LastIndexByte(text, pair[0]); a > 0 && strings.HasSuffix(text, pair[1:]) {
			h.name, h.unit = strings.TrimSpace(text[:a]), strings.TrimSpace(text[a+1:len(text)-1])
			return h
		}
	}
	for _, sep := range []string{"/", "_", " ", ","} {
		a := strings.LastIndex(text, sep)
		if a <= 0 {
			continue
		}
		if unit := strings.TrimSpace(text[a+1:]); knownUnit(unit) {
			h.name, h.unit = strings.TrimSpace(text[:a]), unit
			return h
		}
	}
	return h
}

// knownUnit tells whether a word at the end of a header is a unit.
func knownUnit(u string) bool {
	if _, ok := lengths[u]; ok {
		return true
	}
	if _, ok := spans[u]; ok {
		return true
	}
	return slices.Contains([]string{"kg", "g", "t", "lb", "N", "kN", "lbf", "celsius", "percent", "%", "C", "°C", "utc", "UTC"}, u)
}

// sheet is a mapping resolved against a header.
type sheet struct {
	time        []int
	span        string // unit of elapsed time, "" for instants
	gauges      []gaugeColumn
	name, value int // -1 unless one reading a row
	valueUnit   string
	celsius     []probeColumn
	humidity    []probeColumn
	loads       []loadColumn
	status      map[int]int // by column of the gauge
	// long tables of our own
	longCelsius, longHumidity, longStatus, longShown, longUnit int
	// ignored are the headers that nothing was made of.
	ignored []string
}

type gaugeColumn struct {
	name, unit string
	column     int
}

type probeColumn struct {
	name   string
	column int
}

type loadColumn struct {
	name, unit string
	column     int
}
