package creep

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// kind says what a column beside the law stands for.
type kind int

const (
	kindOffset kind = iota
	kindDrift
	kindZero
	kindAmbient
)

// nuisance is one column beside the law's.
type nuisance struct {
	name, unit string
	kind       kind
	series     int
	ambient    int
	prior      *Knowledge
	fixed      []float64 // one value a row; nil: worked out from the lag
}

// system is one family's regression over all rows of all series.
type system struct {
	in     *Input
	fam    family
	series []int // of each row
	timeH  []float64
	y      []float64
	first  []int // first row of each series, and the total at the end
	extra  []nuisance
	// lag holds ln lag of each ambient record; searched lists those that the
	// fit looks for, in order of their place among the search coordinates.
	lag      []float64
	searched []int
	noise    []*noise
	notes    []Note

	value, slope []float64
	// memory holds the last lagged column of each ambient record: design and
	// derivative ask for the same one.
	memory map[int]lagColumn
}

// lagColumn is a lagged column with its derivative by ln lag.
type lagColumn struct {
	lnLag        float64
	value, slope []float64
}

// newSystem lays out rows and columns. lags gives ln lag of each ambient
// record to start from; nil: the middle of its bounds.
func newSystem(in *Input, fam family, lags []float64) *system {
	s := &system{in: in, fam: fam, value: make([]float64, len(fam.names)), slope: make([]float64, len(fam.names)), memory: map[int]lagColumn{}}
	for i := range in.Series {
		s.first = append(s.first, len(s.y))
		q := &in.Series[i]
		s.timeH, s.y = append(s.timeH, q.TimeH...), append(s.y, q.SagMM...)
		for range q.TimeH {
			s.series = append(s.series, i)
		}
		s.noise = append(s.noise, newNoise(q.TimeH, q.U, 1, 0, 1))
	}
	s.first = append(s.first, len(s.y))
	for i := range in.Ambient {
		lo, hi, search := in.Ambient[i].lagBounds()
		at := (lo + hi) / 2
		if i < len(lags) {
			at = lags[i]
		}
		s.lag = append(s.lag, at)
		if search && s.reach(i) && s.long(i) {
			s.searched = append(s.searched, i)
		}
	}
	s.layOffsets()
	s.layDrifts()
	s.layAmbient()
	return s
}

// leastAmbientH is two daily cycles: with less, an answer to the weather and
// creep cannot be told apart, and only a prior helps.
const leastAmbientH = 48

// long reports whether an ambient record covers two days of the readings.
func (s *system) long(a int) bool {
	rec := &s.in.Ambient[a]
	lo, hi := math.Inf(1), math.Inf(-1)
	for i, t := range s.timeH {
		if rec.answers(s.series[i]) && t >= rec.TimeH[0] && t <= rec.TimeH[len(rec.TimeH)-1] {
			lo, hi = min(lo, t), max(hi, t)
		}
	}
	return hi-lo >= leastAmbientH
}

// reach reports whether an ambient record varies over the rows that answer.
func (s *system) reach(a int) bool {
	rec := &s.in.Ambient[a]
	lo, hi := math.Inf(1), math.Inf(-1)
	for i, t := range s.timeH {
		if rec.answers(s.series[i]) {
			v := interpolate(rec.TimeH, rec.Value, t)
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	return hi-lo > 1e-9
}

// add appends a column unless it is nowhere felt.
func (s *system) add(n nuisance) {
	if n.fixed != nil && rms(n.fixed) == 0 {
		s.notes = append(s.notes, Note{Code: "not-visible", Text: n.name + " falls outside the readings and was left out of the fit"})
		return
	}
	s.extra = append(s.extra, n)
}

func (s *system) layOffsets() {
	for _, o := range s.in.Offsets {
		v := make([]float64, len(s.y))
		for i, t := range s.timeH {
			if s.series[i] == o.Series && t >= o.AtH && (o.ToH == 0 || t < o.ToH) {
				v[i] = 1
			}
		}
		s.add(nuisance{name: o.Name, unit: "mm", kind: kindOffset, series: o.Series, prior: o.Prior, fixed: v})
	}
}

func (s *system) layDrifts() {
	for _, d := range s.in.Drifts {
		v := make([]float64, len(s.y))
		for i, t := range s.timeH {
			if s.series[i] == d.Series && t > d.AtH {
				v[i] = (t - d.AtH) / 24
			}
		}
		s.add(nuisance{name: d.Name, unit: "mm/d", kind: kindDrift, series: d.Series, prior: d.Prior, fixed: v})
	}
	for i := range s.in.Series {
		if u := s.in.Series[i].ZeroU; u > 0 {
			v := make([]float64, len(s.y))
			for r := s.first[i]; r < s.first[i+1]; r++ {
				v[r] = 1
			}
			s.add(nuisance{name: "zero of " + s.in.Series[i].Name, unit: "mm", kind: kindZero, series: i,
				prior: &Knowledge{Value: 0, U: u}, fixed: v})
		}
	}
}

func (s *system) layAmbient() {
	for a := range s.in.Ambient {
		rec := &s.in.Ambient[a]
		if !s.reach(a) {
			s.notes = append(s.notes, Note{Code: "ambient-constant", Text: rec.Name + " did not vary; no coefficient can be found"})
			continue
		}
		if !s.long(a) && rec.Prior == nil {
			s.notes = append(s.notes, Note{Code: "ambient-short", Text: fmt.Sprintf("%s covers less than %d h of the readings; its part cannot be told from creep and stays in the sag", rec.Name, leastAmbientH)})
			continue
		}
		for i := range s.in.Series {
			if rec.answers(i) && s.first[i+1] > s.first[i] {
				s.add(nuisance{name: rec.Name + " on " + s.in.Series[i].Name, unit: "mm per unit", kind: kindAmbient,
					series: i, ambient: a, prior: rec.Prior})
			}
		}
	}
}

// columns is the number of linear unknowns.
func (s *system) columns() int { return len(s.fam.names) + len(s.extra) }

// shapes is 1 where the family has a shape parameter.
func (s *system) shapes() int {
	if s.fam.shape == "" {
		return 0
	}
	return 1
}

// ambientColumn returns an ambient record's lagged value and the
// derivative by ln lag at every row, relative to the baseline of the row's
// series.
func (s *system) ambientColumn(a int, lnLag float64) (value, slope []float64) {
	if m, ok := s.memory[a]; ok && m.lnLag == lnLag {
		return m.value, m.slope
	}
	rec := &s.in.Ambient[a]
	f, d := Lagged(rec.TimeH, rec.Value, math.Exp(lnLag))
	value, slope = make([]float64, len(s.y)), make([]float64, len(s.y))
	for i := range s.in.Series {
		if !rec.answers(i) {
			continue
		}
		begin := s.in.Series[i].Changes[0].AtH
		var v0, d0, n float64
		for r := s.first[i]; r < s.first[i+1]; r++ {
			value[r], slope[r] = interpolate(rec.TimeH, f, s.timeH[r]), interpolate(rec.TimeH, d, s.timeH[r])
			if s.timeH[r] < begin {
				v0, d0, n = v0+value[r], d0+slope[r], n+1
			}
		}
		if n > 0 {
			v0, d0 = v0/n, d0/n
		} else {
			v0, d0 = interpolate(rec.TimeH, f, begin), interpolate(rec.TimeH, d, begin)
		}
		for r := s.first[i]; r < s.first[i+1]; r++ {
			value[r] -= v0
			slope[r] -= d0
		}
	}
	s.memory[a] = lagColumn{lnLag, value, slope}
	return value, slope
}

// at splits the search coordinates into shape and ln lags.
func (s *system) at(q []float64) (shape float64, lag []float64) {
	if s.shapes() == 1 {
		shape, q = q[0], q[1:]
	}
	lag = append([]float64(nil), s.lag...)
	for k, a := range s.searched {
		if k < len(q) {
			lag[a] = q[k]
		}
	}
	return shape, lag
}

// design writes the columns at q, not whitened, into a.
func (s *system) design(q []float64, a *mat.Dense) {
	shape, lag := s.at(q)
	for i, t := range s.timeH {
		s.fam.columns(t, s.in.Series[s.series[i]].Changes, shape, s.value, s.slope)
		for j, v := range s.value {
			a.Set(i, j, v)
		}
	}
	s.extraColumns(lag, a)
}

// extraColumns writes the columns beside the law's.
func (s *system) extraColumns(lag []float64, a *mat.Dense) {
	done := map[int][]float64{}
	for j, n := range s.extra {
		col := n.fixed
		if col == nil {
			if done[n.ambient] == nil {
				done[n.ambient], _ = s.ambientColumn(n.ambient, lag[n.ambient])
			}
			col = done[n.ambient]
		}
		for i := range s.timeH {
			v := col[i]
			if n.kind == kindAmbient && s.series[i] != n.series {
				v = 0
			}
			a.Set(i, len(s.fam.names)+j, v)
		}
	}
}

// derivative writes the derivative of the columns by q[k] into d.
func (s *system) derivative(q []float64, k int, d *mat.Dense) {
	d.Zero()
	shape, lag := s.at(q)
	if k < s.shapes() {
		for i, t := range s.timeH {
			s.fam.columns(t, s.in.Series[s.series[i]].Changes, shape, s.value, s.slope)
			for j, v := range s.slope {
				d.Set(i, j, v)
			}
		}
		return
	}
	a := s.searched[k-s.shapes()]
	_, slope := s.ambientColumn(a, lag[a])
	for j, n := range s.extra {
		if n.kind == kindAmbient && n.ambient == a {
			for r := s.first[n.series]; r < s.first[n.series+1]; r++ {
				d.Set(r, len(s.fam.names)+j, slope[r])
			}
		}
	}
}

// whiten turns every column of a (rows of all series) into independent units.
func (s *system) whiten(a *mat.Dense) {
	raw := a.RawMatrix()
	for i, n := range s.noise {
		if s.first[i+1] == s.first[i] {
			continue
		}
		for j := range raw.Cols {
			n.whiten(raw.Data[s.first[i]*raw.Stride+j:], raw.Stride)
		}
	}
}

// whiteY returns the whitened sags.
func (s *system) whiteY() []float64 {
	y := append([]float64(nil), s.y...)
	for i, n := range s.noise {
		if s.first[i+1] > s.first[i] {
			n.whiten(y[s.first[i]:s.first[i+1]], 1)
		}
	}
	return y
}

// priors lists what is known of the columns beside the law.
func (s *system) priors() []lsq.Prior {
	var p []lsq.Prior
	for j, n := range s.extra {
		if n.prior != nil {
			p = append(p, lsq.Prior{Column: len(s.fam.names) + j, Value: n.prior.Value, U: n.prior.U})
		}
	}
	return p
}

// names lists linear unknowns, then search coordinates.
func (s *system) names() []string {
	out := append([]string(nil), s.fam.names...)
	for _, n := range s.extra {
		out = append(out, n.name)
	}
	if s.shapes() == 1 {
		out = append(out, s.fam.shape)
	}
	for _, a := range s.searched {
		out = append(out, fmt.Sprintf("lag of %s", s.in.Ambient[a].Name))
	}
	return out
}
