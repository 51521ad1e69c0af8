package export

import (
	"io"

	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
)

// Corrected writes the gauges' corrected tracks, one row a point:
//
//	time_utc, seconds_s, gauge, step, readings, indication_mm, sag_gross_mm, u_gross_mm, sag_mm, u_mm
//
// A point is the median of some readings, densest after each change of load; a
// track has at most some thousand. sag_gross is corrected for calibration,
// sense, baseline and lasting offsets; sag is that less the movement of the
// supports, down positive. u is the standard uncertainty of a point from
// scatter and resolution; what is common to all points of a gauge (its
// baseline, its certificate) is not in it. With wide, a row holds the points of
// all gauges that have one there, in columns GAUGE_indication_mm, GAUGE_sag_mm
// and GAUGE_u_mm.
func Corrected(w io.Writer, h *history.History, f *steps.Findings, wide bool) (Summary, error) {
	if wide {
		return correctedWide(w, h, f)
	}
	t, err := newTable(w, []string{"time_utc", "seconds_s", "gauge", "step", "readings",
		"indication_mm", "sag_gross_mm", "u_gross_mm", "sag_mm", "u_mm"})
	if err != nil {
		return Summary{}, err
	}
	s := Summary{}
	for _, track := range f.Tracks {
		for _, p := range track.Points {
			t.when(p.Time, h.First)
			copy(t.cells[2:], []string{h.Rig.Gauges[track.Gauge].Name, f.Steps[p.Step].Name, number(float64(p.N)),
				number(p.Raw), rounded(p.Gross), rounded(p.U), rounded(p.Net), rounded(p.NetU)})
			if err := t.flushRow(); err != nil {
				return s, err
			}
			s.Readings += int64(p.N)
		}
	}
	s.Rows = t.rows
	return s, t.end()
}

// correctedWide merges the tracks: each row begins with the earliest point not
// yet written and takes the other gauges' next points where those lie nearer to
// it than to their own next.
func correctedWide(w io.Writer, h *history.History, f *steps.Findings) (Summary, error) {
	header := []string{"time_utc", "seconds_s", "step"}
	for _, track := range f.Tracks {
		g := h.Rig.Gauges[track.Gauge].Name
		header = append(header, g+"_indication_mm", g+"_sag_mm", g+"_u_mm")
	}
	t, err := newTable(w, header)
	if err != nil {
		return Summary{}, err
	}
	s, next := Summary{}, make([]int, len(f.Tracks))
	for {
		lead := -1
		for g := range f.Tracks {
			if next[g] < len(f.Tracks[g].Points) && (lead < 0 || f.Tracks[g].Points[next[g]].Time < f.Tracks[lead].Points[next[lead]].Time) {
				lead = g
			}
		}
		if lead < 0 {
			s.Rows = t.rows
			return s, t.end()
		}
		first := f.Tracks[lead].Points[next[lead]]
		limit := rowLimit(f.Tracks[lead].Points, next[lead])
		t.when(first.Time, h.First)
		t.cells[2] = f.Steps[first.Step].Name
		for g := range f.Tracks {
			points := f.Tracks[g].Points
			if next[g] == len(points) || points[next[g]].Time >= limit || points[next[g]].Step != first.Step {
				continue
			}
			p := points[next[g]]
			copy(t.cells[3+3*g:], []string{number(p.Raw), rounded(p.Net), rounded(p.NetU)})
			next[g]++
			s.Readings += int64(p.N)
		}
		if err := t.flushRow(); err != nil {
			return s, err
		}
	}
}

// rowLimit is half way from a point to its gauge's next: what lies before it
// belongs to the point's row.
func rowLimit(points []steps.Point, i int) int64 {
	if i+1 == len(points) {
		return points[i].Time + 1e9
	}
	return points[i].Time + (points[i+1].Time-points[i].Time)/2 + 1
}
