package steps

import (
	"math"
	"sort"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// line is a gauge's calibration from an instant on: sag = sign (indication -
// offset)/gain + shift. The shift keeps the sag whole at that instant, where
// only the line was measured anew and nothing moved.
type line struct {
	from                      int64
	sign, gain, offset, shift float64
}

func newLine(cfg *config.Gauge) line {
	l := line{from: math.MinInt64, sign: 1, gain: 1}
	if cfg.Sense == "up" {
		l.sign = -1
	}
	if c := cfg.Calibration; c != nil {
		l.offset = c.Offset.Value
		if c.Gain.Value != 0 {
			l.gain = c.Gain.Value
		}
	}
	return l
}

func (l line) sag(mm float64) float64 { return l.sign*(mm-l.offset)/l.gain + l.shift }

// recalibrate takes in the amendments of the gauge that count from an instant
// within the run.
func (g *gauge) recalibrate(h *history.History) {
	for _, t := range config.Changes(h.Amendments) {
		at := t.UnixNano()
		rig, err := h.Rig.ApplyAt(h.Amendments, t)
		if err != nil || g.index >= len(rig.Gauges) {
			continue // what is wrong with them was said when the run was read
		}
		now, old := newLine(&rig.Gauges[g.index]), g.lines[len(g.lines)-1]
		if now.sign == old.sign && now.gain == old.gain && now.offset == old.offset {
			continue
		}
		now.from = at
		if mm, ok := lastShown(h.Bins(g.index), at); ok {
			now.shift = old.sag(mm) - now.sag(mm)
		}
		g.lines = append(g.lines, now)
	}
}

// lastShown is the last indication before an instant, as near as bins tell.
func lastShown(bins []history.Bin, t int64) (mm float64, ok bool) {
	i := sort.Search(len(bins), func(i int) bool { return bins[i].FirstTime >= t })
	switch {
	case i == 0:
		return 0, false
	case bins[i-1].LastTime < t:
		return bins[i-1].Last, true
	}
	return bins[i-1].Median, true
}

// line is the calibration that holds at an instant.
func (g *gauge) line(t int64) line {
	i := len(g.lines) - 1
	for i > 0 && g.lines[i].from > t {
		i--
	}
	return g.lines[i]
}

// sag turns an indication into downward movement, mm, from where the
// calibrated gauge would read 0.
func (g *gauge) sag(mm float64, t int64) float64 { return g.line(t).sag(mm) }
