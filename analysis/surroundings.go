package analysis

import (
	"fmt"
	"math"

	"gaugelog/analysis/creep"
	"gaugelog/analysis/history"
	"gaugelog/analysis/steps"
)

// surrounding is what an ambient record of the creep fit is.
type surrounding int

const (
	ofTemperature surrounding = iota
	ofHumidity
	ofReference
)

// Shortest records that can be told from creep, h: two daily cycles, and for
// humidity, which is felt through a lag of days, four.
const (
	leastTemperatureH = 48
	leastHumidityH    = 96
)

// mostAmbient bounds an ambient record's points.
const mostAmbient = 6000

// addSurroundings hands over temperature and humidity from the first probe
// that has each, and what reference gauges show beyond them.
func (t *creepTask) addSurroundings(h *history.History, f *steps.Findings) {
	add := func(what surrounding, a creep.Ambient) {
		t.in.Ambient, t.record = append(t.in.Ambient, a), append(t.record, what)
	}
	temperature := t.recordOf(h, leastTemperatureH, func(v history.AmbientSample) float64 { return v.Celsius })
	if temperature != nil {
		temperature.Name = "temperature"
		add(ofTemperature, *temperature)
	} else if t.in.EndH-t.in.FullH > leastTemperatureH/2 {
		t.note("no-temperature", "no probe recorded the temperature for %d h or more: what it did to gauges and beam stays in the sag and in the law", leastTemperatureH)
	}
	humidity := t.recordOf(h, leastHumidityH, func(v history.AmbientSample) float64 { return v.HumidityPercent })
	if humidity != nil {
		humidity.Name, humidity.LagH = "humidity", [2]float64{6, 240}
		switch {
		case temperature != nil && math.Abs(correlation(temperature, humidity)) > mostAlike:
			t.note("humidity-with-temperature", "humidity moved with temperature; what it did cannot be told apart and is counted as temperature's")
		default:
			add(ofHumidity, *humidity)
		}
	}
	for g, gauge := range h.Rig.Gauges {
		if gauge.Sees == "reference" && g < len(f.Tracks) {
			if a, ok := t.reference(h, f, g, temperature); ok {
				add(ofReference, a)
			}
		}
	}
}

// mostAlike is the correlation above which two records are one.
const mostAlike = 0.95

func (t *creepTask) note(code, format string, args ...any) {
	t.notes = append(t.notes, creep.Note{Code: code, Text: fmt.Sprintf(format, args...)})
}

// recordOf reads one quantity from the first probe that has it for leastH
// hours, in means of so many readings that few are left; nil: no probe has.
func (t *creepTask) recordOf(h *history.History, leastH float64, of func(history.AmbientSample) float64) *creep.Ambient {
	for i := range h.Rig.Probes {
		var a creep.Ambient
		for _, v := range h.Ambient(i) {
			at, x := t.hours(v.Time), of(v)
			if n := len(a.TimeH); math.IsNaN(x) || n > 0 && at <= a.TimeH[n-1] {
				continue
			}
			a.TimeH, a.Value = append(a.TimeH, at), append(a.Value, x)
		}
		if n := len(a.TimeH); n >= 2 && a.TimeH[n-1]-a.TimeH[0] >= leastH {
			a.TimeH, a.Value = means(a.TimeH, a.Value, (n+mostAmbient-1)/mostAmbient)
			return &a
		}
	}
	return nil
}

// means replaces every k values by their mean.
func means(x, y []float64, k int) (mx, my []float64) {
	for i := 0; i < len(x); i += k {
		end := min(i+k, len(x))
		var sx, sy float64
		for j := i; j < end; j++ {
			sx, sy = sx+x[j], sy+y[j]
		}
		n := float64(end - i)
		mx, my = append(mx, sx/n), append(my, sy/n)
	}
	return mx, my
}

// correlation is that of b with a read at b's times.
func correlation(a, b *creep.Ambient) float64 {
	var n, sa, sb, saa, sbb, sab float64
	j := 0
	for i, at := range b.TimeH {
		for j < len(a.TimeH)-1 && a.TimeH[j+1] <= at {
			j++
		}
		x, y := a.Value[j]-a.Value[0], b.Value[i]-b.Value[0]
		n, sa, sb, saa, sbb, sab = n+1, sa+x, sb+y, saa+x*x, sbb+y*y, sab+x*y
	}
	va, vb := saa-sa*sa/n, sbb-sb*sb/n
	if n < 2 || va <= 0 || vb <= 0 {
		return 0
	}
	return (sab - sa*sb/n) / math.Sqrt(va*vb)
}

// referenceU is how well it is known that a gauge moves with the reference
// gauge of its stand, as a share: common practice for equal geometry.
const referenceU = 0.3

// reference is what a reference gauge shows beyond its own answer to
// temperature, in means of an hour: movement of the stand, which the gauges on
// it share unless gauges over the supports take it off. False where it shows
// none beyond what its resolution and noise allow.
func (t *creepTask) reference(h *history.History, f *steps.Findings, g int, temperature *creep.Ambient) (creep.Ambient, bool) {
	a := creep.Ambient{Name: "reference gauge " + h.Rig.Gauges[g].Name, LagH: [2]float64{1e-9, 1e-9}}
	track := f.Tracks[g]
	var st, sy, n float64
	flush := func() {
		if n > 0 {
			a.TimeH, a.Value = append(a.TimeH, st/n), append(a.Value, sy/n)
		}
		st, sy, n = 0, 0, 0
	}
	hour := math.Inf(-1)
	for _, p := range track.Points {
		at := t.hours(p.Time)
		if math.Floor(at) != hour || n > 0 && at <= st/n {
			flush()
			hour = math.Floor(at)
		}
		if !math.IsNaN(p.Gross) {
			st, sy, n = st+at, sy+p.Gross, n+1
		}
	}
	flush()
	if len(a.TimeH) < leastBins {
		return a, false
	}
	if temperature != nil {
		a.Value = beyondTemperature(a.TimeH, a.Value, temperature)
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, v := range a.Value {
		lo, hi = min(lo, v), max(hi, v)
	}
	floor := max(h.Rig.Gauges[g].Resolution.Value, track.Noise)
	if hi-lo < 6*floor {
		return a, false
	}
	share := 1.0
	if f.Chord.How == "both" && h.Rig.Gauges[f.Chord.Left].Stand == h.Rig.Gauges[g].Stand && h.Rig.Gauges[f.Chord.Right].Stand == h.Rig.Gauges[g].Stand {
		share = 0
	}
	for i, s := range t.gauges {
		if h.Rig.Gauges[s].Stand == h.Rig.Gauges[g].Stand {
			a.Series = append(a.Series, i)
		}
	}
	a.Prior = &creep.Knowledge{Value: share, U: referenceU}
	t.note("reference-moved", "reference gauge %s moved by %.3g\u202fmm beyond its answer to temperature: the stand did, and so much is taken off the gauges on it, as far as it is not off already",
		h.Rig.Gauges[g].Name, hi-lo)
	return a, len(a.Series) > 0
}

// beyondTemperature takes off v what a straight answer to temperature through
// the best of several lags explains.
func beyondTemperature(timeH, v []float64, temperature *creep.Ambient) []float64 {
	best, least := v, math.Inf(1)
	for _, lag := range []float64{0.1, 0.3, 0.7, 1.2, 2, 3.5, 6, 12} {
		lagged, _ := creep.Lagged(temperature.TimeH, temperature.Value, lag)
		x := make([]float64, len(timeH))
		j := 0
		for i, at := range timeH {
			for j < len(lagged)-1 && temperature.TimeH[j+1] <= at {
				j++
			}
			x[i] = lagged[j]
		}
		r, s := withoutLine(x, v)
		if s < least {
			best, least = r, s
		}
	}
	return best
}

// withoutLine is y less its straight line in x, its mean kept, and the sum of
// squares left.
func withoutLine(x, y []float64) (rest []float64, squares float64) {
	n := float64(len(x))
	var sx, sy, sxx, sxy float64
	for i := range x {
		dx := x[i] - x[0]
		sx, sy, sxx, sxy = sx+dx, sy+y[i], sxx+dx*dx, sxy+dx*y[i]
	}
	slope := 0.0
	if d := sxx - sx*sx/n; d > 0 {
		slope = (sxy - sx*sy/n) / d
	}
	for i := range x {
		v := y[i] - slope*(x[i]-x[0]-sx/n)
		rest = append(rest, v)
		squares += (v - sy/n) * (v - sy/n)
	}
	return rest, squares
}
