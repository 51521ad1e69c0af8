package creep

import "math"

// lagColumns are one ambient record's lagged columns in every series, with
// their derivatives by ln lag; nil where a series does not answer.
type lagColumns struct {
	lnLag        float64
	value, slope [][]float64
}

// leastAmbientH is two daily cycles: with less, an answer to the weather and
// creep cannot be told apart, and only a prior helps.
const leastAmbientH = 48

// long reports whether an ambient record covers two days of the readings.
func (s *system) long(a int) bool {
	rec := &s.in.Ambient[a]
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := range s.parts {
		if !rec.answers(i) {
			continue
		}
		for _, t := range s.parts[i].TimeH {
			if t >= rec.TimeH[0] && t <= rec.TimeH[len(rec.TimeH)-1] {
				lo, hi = min(lo, t), max(hi, t)
			}
		}
	}
	return hi-lo >= leastAmbientH
}

// reach reports whether an ambient record varies over the rows that answer.
func (s *system) reach(a int) bool {
	rec := &s.in.Ambient[a]
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := range s.parts {
		if !rec.answers(i) {
			continue
		}
		for _, t := range s.parts[i].TimeH {
			v := interpolate(rec.TimeH, rec.Value, t)
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	return hi-lo > 1e-9
}

// ambientColumns returns an ambient record's lagged value and its derivative
// by ln lag in every series, relative to the baseline of the series.
func (s *system) ambientColumns(a int, lnLag float64) lagColumns {
	if m, ok := s.memory[a]; ok && m.lnLag == lnLag {
		return m
	}
	rec := &s.in.Ambient[a]
	f, d := Lagged(rec.TimeH, rec.Value, math.Exp(lnLag))
	m := lagColumns{lnLag: lnLag, value: make([][]float64, len(s.parts)), slope: make([][]float64, len(s.parts))}
	for i := range s.parts {
		if rec.answers(i) && len(s.parts[i].TimeH) > 0 {
			m.value[i], m.slope[i] = s.parts[i].seen(rec.TimeH, f, s.in.BaselineH), s.parts[i].seen(rec.TimeH, d, s.in.BaselineH)
		}
	}
	s.memory[a] = m
	return m
}

// seen reads v at a series' bins, less what it was when the zero was read.
func (p *seriesPart) seen(timeH, v []float64, baseline [2]float64) []float64 {
	at := func(t float64) float64 { return interpolate(timeH, v, t) }
	out := p.column(at)
	p.fromBaseline(out, baseline, at)
	return out
}
