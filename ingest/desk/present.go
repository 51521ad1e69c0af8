package desk

import (
	"math"
	"slices"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/rollup"
)

// drawEvery is how often the curves are copied from the bins.
const drawEvery = 10 * time.Second

// trendIntervals are the intervals over which two changes are compared, the
// longest that fits first.
var trendIntervals = []time.Duration{24 * time.Hour, 6 * time.Hour, time.Hour, 10 * time.Minute}

// farthestRunOut bounds the forecast of a gauge's end of travel.
const farthestRunOut = 20 * 365 * 24 * time.Hour

// publish puts out a new look.
func (d *Desk) publish(now time.Time) {
	status := d.o.Status()
	if status == nil {
		status = &ingest.Status{DiskFree: -1}
	}
	s := &Snapshot{
		At: now, Status: status, Missed: d.missed.Load(), Loads: d.loads, Marks: d.marks, Withdrawn: d.gone,
		Outlook: d.outlook.outlook, OutlookTried: d.outlook.at,
		Rebuilding: d.rebuilding, Onlooking: d.o.Alarms != nil,
	}
	s.Whole = !d.rebuilding && !d.baseline.reread && !d.baseline.since && !d.baseline.busy && (d.o.Analyse == nil || !d.outlook.at.IsZero())
	if s.Onlooking {
		s.Alarms, s.PastAlarms = d.o.Alarms()
	} else {
		s.Alarms, s.PastAlarms = d.engine.Current(), d.engine.Past()
	}
	if d.outlook.err != nil {
		s.OutlookError = d.outlook.err.Error()
	}
	if d.o.Ports != nil {
		s.Ports = d.o.Ports()
	}
	if d.o.Forward != nil {
		s.Forward = d.o.Forward()
	}
	if d.o.Queued != nil {
		s.Queued = d.o.Queued()
	}
	for i, last := range status.Last {
		if last.Probe {
			s.Probes = append(s.Probes, last)
		} else if i < len(d.o.Rig.Gauges) {
			s.Gauges = append(s.Gauges, d.gauge(i, last, now))
		}
	}
	if d.curves == nil || now.Sub(d.drawn) >= drawEvery {
		d.curves, d.drawn = d.draw(), now
	}
	s.Curves = d.curves
	d.snapshot.Store(s)
}

// sign turns a growing indication into sag: the beam goes down (down) or up.
func sign(g *config.Gauge) float64 {
	if g.Sense == "up" {
		return -1
	}
	return 1
}

func (d *Desk) gauge(i int, last ingest.Last, now time.Time) Gauge {
	rig := &d.o.Rig.Gauges[i]
	g := Gauge{Last: last, Sees: rig.Sees, Resolution: rig.Resolution.Value}
	if !last.Seen {
		return g
	}
	if base, ok := d.baselineOf(i); ok {
		sag := (last.MM - base) * sign(rig)
		g.Sag = &sag
	}
	series := &d.book.Series[i]
	if v, ok := changeOver(series, last.Wall, 24*time.Hour); ok {
		v *= sign(rig)
		g.Day = &v
	}
	g.Trend = d.trend(series, last.Wall, sign(rig))
	d.travel(&g, rig, now)
	return g
}

// changeOver is the change of the indication over the interval before t.
func changeOver(s *rollup.Series, t int64, over time.Duration) (float64, bool) {
	v1, _, ok1 := s.Near(t)
	v0, _, ok0 := s.Near(t - int64(over))
	return v1 - v0, ok1 && ok0
}

// trend compares the longest two equal intervals since the last load change.
func (d *Desk) trend(s *rollup.Series, t int64, sign float64) *Trend {
	since := unix(d.loads.Since)
	for _, over := range trendIntervals {
		// A tenth of the interval is left out behind the load change: what
		// happens then is the loading itself.
		if since != 0 && t-int64(2*over) < since+int64(over/10) {
			continue
		}
		last, ok1 := changeOver(s, t, over)
		before, ok0 := changeOver(s, t-int64(over), over)
		if ok1 && ok0 {
			return &Trend{Over: over, Last: sign * last, Before: sign * before}
		}
	}
	return nil
}

// travel works out how far the plunger can still follow the beam down, and
// until when at the present rate.
func (d *Desk) travel(g *Gauge, rig *config.Gauge, now time.Time) {
	if len(rig.Travel) != 2 {
		return
	}
	low, high := rig.Travel[0].Value, rig.Travel[1].Value
	left := high - g.MM
	if sign(rig) < 0 {
		left = g.MM - low
	}
	share := left / (high - low)
	g.TravelLeft, g.TravelShare = &left, &share
	if t := g.Trend; t != nil && t.Over >= time.Hour && t.Last > 2*g.Resolution && left > 0 {
		in := left / t.Last * float64(t.Over)
		if in < float64(farthestRunOut) {
			g.RunsOut = now.Add(time.Duration(in))
		}
	}
}

// draw copies the bins for the plots.
func (d *Desk) draw() *Curves {
	c := &Curves{Width: time.Duration(d.book.Series[0].Whole.Width)}
	if d.book.Origin != 0 {
		c.Origin = time.Unix(0, d.book.Origin)
	}
	gauges := len(d.o.Rig.Gauges)
	for i := range d.book.Series {
		s := &d.book.Series[i]
		curve := Curve{Name: s.Name, Sign: 1, Whole: filled(s.Whole.Bins), Since: filled(s.Since)}
		switch {
		case i < gauges:
			curve.Sign = sign(&d.o.Rig.Gauges[i])
			curve.Baseline, _ = d.baselineOf(i)
		case (i-gauges)%2 == 0:
			curve.Kind = CelsiusCurve
		default:
			curve.Kind = HumidityCurve
		}
		c.Series = append(c.Series, curve)
	}
	return c
}

// filled copies the bins that hold readings.
func filled(bins []rollup.Bin) []rollup.Bin {
	return slices.DeleteFunc(slices.Clone(bins), func(b rollup.Bin) bool { return b.N == 0 || math.IsNaN(b.Sum) })
}
