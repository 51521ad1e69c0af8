package answer

import (
	"math"
	"strings"
	"time"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/rollup"
)

// Bounds of what is drawn.
const (
	mostPoints   = 260
	mostCurves   = 8
	leastSpan    = 0.01 // mm, so that a still gauge is not all noise
	leastDegrees = 1.0
)

// Point is a place in a figure's own quantities.
type Point [2]float64

// Line is one curve.
type Line struct {
	Name   string  `json:"name"`
	Points []Point `json:"points"`
}

// Tick is a place on an axis with its label.
type Tick struct {
	At    float64 `json:"at"`
	Label string  `json:"label"`
}

// Figure is one plot before it is drawn: a few hundred points a curve and no
// more, however long the run.
type Figure struct {
	ID    string `json:"id"`
	Title string `json:"title"`
	// Says is a sentence beside it, Alt what stands for it where it cannot be seen.
	Says   string `json:"says"`
	Alt    string `json:"alt"`
	XLabel string `json:"x_label"`
	YLabel string `json:"y_label"`
	// X0 and X1 bound the x axis: s since 1970, or the decimal logarithm of s
	// since the load change. XTicks are its labels.
	X0     float64 `json:"x0"`
	X1     float64 `json:"x1"`
	XTicks []Tick  `json:"x_ticks,omitempty"`
	// Least is the smallest height of the y axis.
	Least float64 `json:"least"`
	Lines []Line  `json:"lines,omitempty"`
	// Marks are upright lines.
	Marks []Tick `json:"marks,omitempty"`
}

// Figures are the plots of a snapshot: sag against log time since the load
// change, sag against time, temperature and humidity against time.
func Figures(d *desk.Desk, s *desk.Snapshot) []Figure {
	if s.Curves == nil {
		return nil
	}
	return []Figure{sinceFigure(d, s), timeFigure(d, s), roomFigure(d, s)}
}

// beams are the curves of gauges that see the beam, at most eight.
func beams(d *desk.Desk, s *desk.Snapshot) []desk.Curve {
	var out []desk.Curve
	for i, g := range d.Rig().Gauges {
		if (g.Sees == "beam" || g.Sees == "") && len(out) < mostCurves {
			out = append(out, s.Curves.Series[i])
		}
	}
	return out
}

// sinceFigure is sag against the logarithm of the time since the load change.
func sinceFigure(d *desk.Desk, s *desk.Snapshot) Figure {
	f := Figure{ID: "plot-log", Title: "Sag against log time", XLabel: "time since the load change", YLabel: "sag, mm, uncorrected", Least: leastSpan,
		Says: "Straight here means that each tenfold time adds the same sag.",
		Alt:  "Uncorrected sag of each gauge against the logarithm of the time since the last load change."}
	if s.Curves.Origin.IsZero() {
		f.Says = "It begins with the first load change."
		return f
	}
	f.X0, f.X1 = 0, 2
	for _, c := range beams(d, s) {
		l := Line{Name: c.Name}
		for i := range c.Since {
			b := &c.Since[i]
			t := float64(b.Time()-s.Curves.Origin.UnixNano()) / 1e9
			if t < 1 {
				continue
			}
			l.Points = append(l.Points, Point{math.Log10(t), (b.Mean() - c.Baseline) * c.Sign})
			f.X1 = max(f.X1, math.Log10(t))
		}
		f.Lines = append(f.Lines, l)
	}
	for _, k := range []struct {
		s     float64
		label string
	}{{1, "1 s"}, {10, "10 s"}, {60, "1 min"}, {600, "10 min"}, {3600, "1 h"}, {36000, "10 h"}, {86400 * 4, "4 d"}, {86400 * 40, "40 d"}, {86400 * 365.25, "1 a"}, {86400 * 3652.5, "10 a"}} {
		if x := math.Log10(k.s); x <= f.X1 {
			f.XTicks = append(f.XTicks, Tick{x, k.label})
		}
	}
	return f
}

// timeFigure is sag against time over the whole run, with the marks.
func timeFigure(d *desk.Desk, s *desk.Snapshot) Figure {
	f := Figure{ID: "plot-time", Title: "Sag against time", XLabel: "date", YLabel: "sag, mm, uncorrected", Least: leastSpan,
		Says: "The upright lines are marks.", Alt: "Uncorrected sag of each gauge over the whole run, with the marks entered."}
	f.Lines, f.X0, f.X1 = overTime(beams(d, s))
	if f.X1 <= f.X0 {
		return f
	}
	f.XTicks, f.XLabel = timeTicks(d, f.X0, f.X1)
	for _, m := range s.Marks {
		if _, gone := s.Withdrawn[m.ID]; gone && m.ID != "" || m.Withdraw != "" || len(m.Loads) == 0 && m.Step == "" && m.Act == "" {
			continue
		}
		if x := float64(m.Time) / 1e9; x >= f.X0 && x <= f.X1 {
			label := m.Step
			if label == "" && len(m.Loads) > 0 {
				label = m.Loads[0].Shown
			}
			if m.Act != "" {
				label = m.Act
			}
			f.Marks = append(f.Marks, Tick{x, label})
		}
	}
	return f
}

// roomFigure is the probes' temperatures against time.
func roomFigure(d *desk.Desk, s *desk.Snapshot) Figure {
	f := Figure{ID: "plot-room", Title: "Temperature against time", YLabel: "°C", Least: leastDegrees, Alt: "Temperature of each probe over the whole run."}
	var curves []desk.Curve
	for _, c := range s.Curves.Series {
		if c.Kind == desk.CelsiusCurve && len(c.Whole) > 0 && len(curves) < mostCurves {
			c.Name = strings.TrimSuffix(c.Name, " temperature")
			curves = append(curves, c)
		}
	}
	f.Lines, f.X0, f.X1 = overTime(curves)
	if f.X1 > f.X0 {
		f.XTicks, f.XLabel = timeTicks(d, f.X0, f.X1)
	}
	return f
}

// overTime makes lines of whole curves, x in seconds since 1970.
func overTime(curves []desk.Curve) (lines []Line, x0, x1 float64) {
	x0, x1 = math.Inf(1), math.Inf(-1)
	for _, c := range curves {
		l := Line{Name: c.Name}
		for _, b := range thin(c.Whole) {
			x := float64(b.Time()) / 1e9
			x0, x1 = min(x0, x), max(x1, x)
			l.Points = append(l.Points, Point{x, (b.Mean() - c.Baseline) * c.Sign})
		}
		lines = append(lines, l)
	}
	if x1 < x0 {
		x0, x1 = 0, 0 // there is nothing to draw
	}
	return lines, x0, x1
}

// thin joins neighbouring bins until there are few enough.
func thin(bins []rollup.Bin) []rollup.Bin {
	for len(bins) > mostPoints {
		out := make([]rollup.Bin, 0, len(bins)/2+1)
		for i := 0; i < len(bins); i += 2 {
			b := bins[i]
			if i+1 < len(bins) {
				b = rollup.Join(b, bins[i+1])
			}
			out = append(out, b)
		}
		bins = out
	}
	return bins
}

// timeTicks puts ticks at round local times.
func timeTicks(d *desk.Desk, x0, x1 float64) ([]Tick, string) {
	span := x1 - x0
	steps := []float64{1, 5, 15, 60, 300, 900, 3600, 3 * 3600, 6 * 3600, 86400, 2 * 86400, 3 * 86400, 5 * 86400, 7 * 86400, 14 * 86400, 30 * 86400, 91 * 86400, 182 * 86400, 365 * 86400}
	step := steps[len(steps)-1]
	for _, k := range steps {
		if span/k <= 4 {
			step = k
			break
		}
	}
	layout, label := "2 Jan", "date"
	switch {
	case step < 60:
		layout, label = "15:04:05", "time of day"
	case step < 86400:
		layout, label = "15:04", "time of day"
	case step >= 182*86400:
		layout, label = "Jan 2006", "date"
	}
	_, offset := d.Local(time.Unix(int64(x0), 0)).Zone()
	var out []Tick
	for x := math.Ceil((x0+float64(offset))/step)*step - float64(offset); x <= x1; x += step {
		out = append(out, Tick{x, d.Local(time.Unix(int64(x), 0)).Format(layout)})
	}
	return out, label
}
