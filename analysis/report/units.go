package report

import (
	"fmt"
	"math"
	"time"

	"gaugelog/config"
)

// units converts the result's units into those of the report. Factors are
// exact by definition (NIST SP 811): 1 in = 25.4 mm, 1 lbf = 4.4482216152605 N,
// 1 lb = 0.45359237 kg.
type units map[string]conversion

type conversion struct {
	factor float64
	unit   string
}

const (
	inch  = 25.4
	pound = 4.4482216152605
	psi   = pound / (inch * inch) // MPa
)

var us = units{
	"mm":    {1 / inch, "in"},
	"N":     {1 / pound, "lbf"},
	"kg":    {1 / 0.45359237, "lb"},
	"MPa":   {1 / psi, "psi"},
	"N.mm2": {1 / (pound * inch * inch), "lb-in2"},
	"mm/N":  {pound / inch, "in/lbf"},
	"N/mm":  {inch / pound, "lbf/in"},

	// The laws' parameters.
	"mm/(N.h)":   {pound / inch, "in/(lbf.h)"},
	"mm/(N.h^n)": {pound / inch, "in/(lbf.h^n)"},

	"mm/d": {1 / inch, "in/d"},
	"mm/K": {1 / (inch * 1.8), "in/°F"},
	"m/s2": {1 / 0.3048, "ft/s2"},
}

func unitsOf(name string) units {
	if name == "us" {
		return us
	}
	return units{}
}

// convert returns the factor and the name of the unit shown for a result's.
func (u units) convert(unit string) (float64, string) {
	if c, ok := u[unit]; ok {
		return c.factor, c.unit
	}
	switch unit {
	case "1":
		return 1, ""
	case "N.mm2":
		return 1e-6, "N·m2" // 1 N.m2 = 1e6 N.mm2
	}
	return 1, unit
}

// of is the name alone, for a table's head.
func (u units) of(unit string) string { _, name := u.convert(unit); return name }

// zoneOf is the rig's time zone, UTC where it names none.
func zoneOf(rig *config.Rig) *time.Location {
	if rig != nil && rig.Timezone != "" {
		if l, err := time.LoadLocation(rig.Timezone); err == nil {
			return l
		}
	}
	return time.UTC
}

// local prints an instant of the result in the rig's time zone with its
// offset; a text that is no instant is printed as it is.
func (b *builder) local(instant string) string {
	t, err := time.Parse(time.RFC3339Nano, instant)
	if err != nil {
		return instant
	}
	return b.localTime(t)
}

func (b *builder) localTime(t time.Time) string {
	return t.In(b.zone).Format("2006-01-02 15:04:05 -07:00")
}

// temperatureUnit is the report's own; temperature converts to it.
func (b *builder) temperatureUnit() string {
	if b.u.of("mm") == "in" {
		return "°F"
	}
	return "°C"
}

func (b *builder) temperature(celsius float64) float64 {
	if b.u.of("mm") == "in" {
		return celsius*1.8 + 32
	}
	return celsius
}

// span prints seconds as people say them: 60 s, 1 h, 7 d, 10 a.
func span(s float64) string {
	for _, u := range []struct {
		seconds float64
		name    string
	}{{365.25 * 86400, "a"}, {86400, "d"}, {3600, "h"}, {60, "min"}} {
		if s >= u.seconds && (s >= 120 || u.seconds != 60) {
			return trim(s/u.seconds) + " " + u.name
		}
	}
	return trim(s) + " s"
}

func trim(v float64) string {
	if v == math.Round(v) {
		return fmt.Sprintf("%.0f", v)
	}
	return fmt.Sprintf("%.3g", v)
}
