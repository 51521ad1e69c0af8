package desk

import (
	"fmt"
	"math"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
)

func (d *Desk) travelFacts(now time.Time, gauges []Gauge) []alarm.Fact {
	var out []alarm.Fact
	within := time.Duration(d.o.Rig.Alarms.TravelWithin.Value * 1e9)
	for _, g := range gauges {
		if g.TravelLeft == nil {
			continue
		}
		least := travelShare * *g.TravelLeft / *g.TravelShare
		if l := d.o.Rig.Limits.TravelLeft; l != nil {
			least = l.Value
		}
		f := alarm.Fact{Cause: "travel", Subject: g.Name, Wish: alarm.Over}
		soon := !g.RunsOut.IsZero() && g.RunsOut.Sub(now) < within
		soonish := !g.RunsOut.IsZero() && g.RunsOut.Sub(now) < time.Duration(runOutBack*float64(within))
		text := fmt.Sprintf("%s mm of travel are left", Fixed(*g.TravelLeft, g.Resolution))
		switch {
		case *g.TravelLeft < least:
			f.Wish, f.Text = alarm.Raise, text
		case soon:
			f.Wish, f.Text = alarm.Raise, text+", at the present rate until "+d.Local(g.RunsOut).Format("2 Jan 2006")
		case *g.TravelLeft < (1+travelBack)*least, soonish:
			f.Wish = alarm.Leave
		}
		out = append(out, f)
	}
	return out
}

// sagFacts compares the greatest sag with the limits: the analysis's figures
// where they are fresh, else the uncorrected ones, and says which.
func (d *Desk) sagFacts(now time.Time, gauges []Gauge) []alarm.Fact {
	if d.rebuilding { // the baseline is not known yet
		if waiting := d.engine.Waiting("sag", "catcher", "span-over-sag"); waiting != nil {
			return waiting
		}
	}
	name, sag, kind := d.greatestSag(now, gauges)
	if name == "" {
		return nil
	}
	l := d.o.Rig.Limits
	text := fmt.Sprintf("the sag at %s is %.3f mm (%s)", name, sag, kind)
	var out []alarm.Fact
	if l.Sag != nil {
		out = append(out, above("sag", sag, l.Sag.Value, text+fmt.Sprintf(", the limit %s", l.Sag.Shown)))
	}
	if l.CatcherGap != nil {
		out = append(out, above("catcher", sag, catcherShare*l.CatcherGap.Value, text+fmt.Sprintf(", the gap under the load %s", l.CatcherGap.Shown)))
	}
	if l.SpanOverSag != nil {
		most := span(d.o.Rig) / l.SpanOverSag.Value
		out = append(out, above("span-over-sag", sag, most, text+fmt.Sprintf(", the span over it %.0f, the limit %s", span(d.o.Rig)/max(sag, 1e-9), l.SpanOverSag.Shown)))
	}
	return out
}

func above(cause string, value, limit float64, text string) alarm.Fact {
	f := alarm.Fact{Cause: cause, Wish: alarm.Over, Text: text}
	switch {
	case value >= limit:
		f.Wish = alarm.Raise
	case value >= (1-comeBack)*limit:
		f.Wish = alarm.Leave
	}
	return f
}

func (d *Desk) greatestSag(now time.Time, gauges []Gauge) (name string, sag float64, kind string) {
	for _, g := range gauges {
		if g.Sag != nil && (g.Sees == "beam" || g.Sees == "") && (name == "" || *g.Sag > sag) {
			name, sag, kind = g.Name, *g.Sag, "uncorrected"
		}
	}
	o := d.outlook.outlook
	if o == nil || now.Sub(time.Unix(0, o.At)) > outlookFor {
		return name, sag, kind
	}
	corrected := false
	for _, s := range o.Sag {
		// An uncorrected sag beyond a corrected one is news since the last
		// look of the analysis, or a disturbance it has taken out.
		if !corrected || s.MM > sag {
			name, sag, kind, corrected = s.Gauge, s.MM, "corrected", true
		}
	}
	for _, g := range gauges {
		if g.Sag != nil && corrected && g.Name == name && *g.Sag > sag && g.Wall > o.At+int64(2*time.Minute) {
			sag, kind = *g.Sag, "uncorrected"
		}
	}
	return name, sag, kind
}

func (d *Desk) temperatureFacts(s *ingest.Status) []alarm.Fact {
	band := d.o.Rig.Limits.Temperature
	if len(band) != 2 {
		return nil
	}
	var out []alarm.Fact
	for _, l := range s.Last {
		if !l.Probe || !l.Seen || l.Silent || math.IsNaN(l.Celsius) {
			continue
		}
		f := alarm.Fact{Cause: "temperature", Subject: l.Name, Wish: alarm.Over,
			Text: fmt.Sprintf("%.1f °C, wanted %s to %s", l.Celsius, band[0].Shown, band[1].Shown)}
		switch low, high := band[0].Value, band[1].Value; {
		case l.Celsius < low || l.Celsius > high:
			f.Wish = alarm.Raise
		case l.Celsius < low+kelvinBack || l.Celsius > high-kelvinBack:
			f.Wish = alarm.Leave
		}
		out = append(out, f)
	}
	return out
}
