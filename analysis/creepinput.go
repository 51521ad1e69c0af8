package analysis

import (
	"math"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
	"gaugelog/config"
)

const hour = int64(3600e9)

// creepTask is what the creep fit is asked and how to read its answer.
type creepTask struct {
	in     creep.Input
	step   int   // index of the creep step
	gauge  int   // index of the creep gauge
	gauges []int // of each series, in the rig's list; the first is gauge
	// share is each series' sag per newton over the creep gauge's.
	share  []float64
	origin int64 // instant of hour 0
	full   int64 // full load of the creep step
	end    int64 // its end
	// unload is the first change after the creep step, -1 where there is none.
	unload int
	// below is true where less hung after the creep step than at the baseline.
	below bool
	// record says of each of in.Ambient what it is.
	record []surrounding
	// notes are what a reader must know of the input, for the warnings.
	notes []creep.Note
}

// hours turns an instant into hours from the task's origin.
func (t *creepTask) hours(ns int64) float64 { return float64(ns-t.origin) / float64(hour) }

// creepStep is the longest loaded step; -1 where there is none.
func creepStep(f *steps.Findings) int {
	best, longest := -1, int64(0)
	for i, s := range f.Steps {
		if i <= f.Baseline || s.Unmarked || s.Response != nil && !*s.Response {
			continue
		}
		if sum := totalOf(s.Loads) - totalOf(f.Steps[f.Baseline].Loads); sum > 0 && s.To-s.From > longest {
			best, longest = i, s.To-s.From
		}
	}
	return best
}

func totalOf(loads map[string]float64) float64 {
	sum := 0.0
	for _, name := range sortedNames(loads) {
		sum += loads[name]
	}
	return sum
}

// creepGauge is the one the rig names, else the one between the supports
// that sags most in the creep step; -1 where none sags.
func creepGauge(rig *config.Rig, f *steps.Findings, step int) int {
	best, most := -1, 0.0
	for i, g := range rig.Gauges {
		if g.Name == rig.Read.CreepGauge {
			return i
		}
		if !touches(g) || i >= len(f.Steps[step].Gauges) {
			continue
		}
		if v := f.Steps[step].Gauges[i].Net.Final; v != nil && v.MM > most {
			best, most = i, v.MM
		}
	}
	return best
}

// creepTaskOf builds the fit's input from the creep gauge's net track.
// shares is the net sag per newton of each load at each gauge.
func creepTaskOf(h *history.History, f *steps.Findings, shares [][]float64) (*creepTask, bool) {
	step := creepStep(f)
	if step < 0 || len(f.Loads) == 0 {
		return nil, false
	}
	gauge := creepGauge(h.Rig, f, step)
	if gauge < 0 || gauge >= len(f.Tracks) {
		return nil, false
	}
	t := &creepTask{step: step, gauge: gauge, unload: -1}
	first := f.Loads[0]
	t.origin = first.Full - int64(first.RampS*1e9)
	t.full, t.end = f.Steps[step].Full, f.Steps[step].To
	t.below = f.BelowBaseline() > step
	for i, c := range f.Loads {
		if c.Step == step {
			t.full = c.Full
		}
		if c.Step == step+1 {
			t.unload, t.end = i, c.Full-int64(c.RampS*1e9)
		}
	}
	pattern, load := patternShare(h.Rig, f, step, shares[gauge])
	if load == 0 || pattern == 0 {
		return nil, false
	}
	t.in = creep.Input{FullH: t.hours(t.full), EndH: t.hours(t.end), LoadN: load, InitialH: h.Rig.Read.InitialAfter.Value / 3600}
	if f.BaselineTo > f.BaselineFrom {
		t.in.BaselineH = [2]float64{t.hours(f.BaselineFrom), t.hours(f.BaselineTo)}
	}
	if limit := h.Rig.Limits.Sag; limit != nil {
		t.in.LimitMM = limit.Value
	}
	t.addSeries(h, f, shares, pattern)
	t.addOffsets(f)
	t.addDrifts(h, f)
	t.addSurroundings(h, f)
	return t, true
}

// patternShare is the creep gauge's sag per newton of total load in the creep
// step's pattern, and that total, above the baseline.
func patternShare(rig *config.Rig, f *steps.Findings, step int, share []float64) (perNewton, total float64) {
	base := f.Steps[f.Baseline].Loads
	sum := 0.0
	for j, l := range rig.Loads {
		n := f.Steps[step].Loads[l.Name] - base[l.Name]
		sum += n * share[j]
		total += n
	}
	if total == 0 {
		return 0, 0
	}
	return sum / total, total
}

// changeBefore is the full load of the last change before an instant; the
// first change where it lies before all of them.
func changeBefore(f *steps.Findings, at int64) int64 {
	last := f.Loads[0].Full
	for _, c := range f.Loads {
		if c.Full <= at {
			last = c.Full
		}
	}
	return last
}

// creepBin gathers a track's points into bins equally spaced in the logarithm
// of the time since the last change of load, and nowhere wider than an hour,
// so that the day's temperature is not averaged away.
type creepBin struct {
	floor float64 // no average of indications is better than this, mm
	into  *creep.Series
	cell  [3]int64
	// Sums of weights, of weighted times and sags, of points' readings.
	w, t, y float64
	n       int
}

// binsPerDecade is the practice's figure for creep fits.
const binsPerDecade = 20

func (b *creepBin) add(atH, changeH float64, p steps.Point) {
	since := math.Abs(atH-changeH) * 3600
	cell := [3]int64{int64(math.Floor(changeH * 3600)), int64(math.Floor(binsPerDecade * math.Log10(max(since, 1)))), int64(math.Floor(atH))}
	if cell != b.cell {
		b.close()
		b.cell = cell
	}
	w := 1 / (p.NetU * p.NetU)
	b.w, b.t, b.y, b.n = b.w+w, b.t+w*atH, b.y+w*p.Net, b.n+p.N
}

// close hands the open bin over. Times rise: a bin that does not is left out.
func (b *creepBin) close() {
	if b.w > 0 {
		at := b.t / b.w
		if n := len(b.into.TimeH); n == 0 || at > b.into.TimeH[n-1] {
			b.into.TimeH, b.into.SagMM = append(b.into.TimeH, at), append(b.into.SagMM, b.y/b.w)
			b.into.U, b.into.N = append(b.into.U, max(1/math.Sqrt(b.w), b.floor)), append(b.into.N, b.n)
		}
	}
	b.w, b.t, b.y, b.n = 0, 0, 0, 0
}

// placing reports whether a load was being placed or its swing dying out.
func placing(f *steps.Findings, at int64) bool {
	for _, c := range f.Loads {
		s := f.Steps[c.Step]
		settled := c.Full + int64(max(s.RingingS, 5)*1e9)
		if at >= c.Full-int64((c.RampS+2)*1e9) && at < settled {
			return true
		}
	}
	return false
}
