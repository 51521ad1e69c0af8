package report

import (
	"fmt"
	"math"
	"time"

	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
)

// units is the system in which the report shows the result's figures.
type units string

func unitsOf(name string) units { return units(unitsystem.Of(name)) }

// convert returns the factor and the name of the unit shown for a result's.
func (u units) convert(unit string) (float64, string) { return unitsystem.Convert(string(u), unit) }

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
	if b.u == "us" {
		return "°F"
	}
	return "°C"
}

func (b *builder) temperature(celsius float64) float64 {
	if b.u == "us" {
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
