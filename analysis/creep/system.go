package creep

import (
	"fmt"

	"gaugelog/analysis/lsq"
)

// kind says what a column beside the law stands for.
type kind int

const (
	kindOffset kind = iota
	kindDrift
	kindZero
	kindAmbient
	kindLoad
	kindInstant
)

// String returns the kind in one word.
func (k kind) String() string {
	return [...]string{"offset", "drift", "zero", "ambient", "load", "instant"}[k]
}

// nuisance is one column beside the law's, of one series.
type nuisance struct {
	name, unit string
	kind       kind
	ambient    int
	prior      *Knowledge
	// fixed has one value a row; nil: worked out from the lag, or from the law
	// where load names the changes it answers to.
	fixed []float64
	load  []Change
}

// seriesPart is one series with the columns that are its own.
type seriesPart struct {
	*Series
	extra []nuisance
	noise *noise
}

// system is one family's regression over all series: the law's columns are
// shared, all others belong to one series.
type system struct {
	in    *Input
	fam   family
	parts []seriesPart
	// lag holds ln lag of each ambient record; searched lists those that the
	// fit looks for, in order of their place among the search coordinates.
	lag      []float64
	searched []int
	notes    []Note

	// memory holds the last lagged columns of each ambient record, and terms
	// the law's columns at the last shape: design and derivative ask for the
	// same ones.
	memory map[int]lagColumns
	terms  lawColumns
}

// lawColumns are the law's columns of every series with their derivatives by
// the shape: by series, term, row.
type lawColumns struct {
	shape        float64
	value, slope [][][]float64
}

// law returns the law's columns at a shape.
func (s *system) law(shape float64) lawColumns {
	if s.terms.value != nil && s.terms.shape == shape {
		return s.terms
	}
	m := lawColumns{shape: shape}
	for i := range s.parts {
		value, slope := s.fam.columns(s.parts[i].TimeH, s.parts[i].Changes, shape)
		m.value, m.slope = append(m.value, value), append(m.slope, slope)
	}
	s.terms = m
	return m
}

// newSystem lays out rows and columns. lags gives ln lag of each ambient
// record to start from; nil: the middle of its bounds.
func newSystem(in *Input, fam family, lags []float64) *system {
	s := &system{in: in, fam: fam, memory: map[int]lagColumns{}}
	for i := range in.Series {
		q := &in.Series[i]
		s.parts = append(s.parts, seriesPart{Series: q, noise: newNoise(q.TimeH, q.U, 1, 0, 1)})
	}
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
	s.layInstants()
	s.layLoads()
	return s
}

// add appends a column to a series unless it is nowhere felt.
func (s *system) add(series int, n nuisance) {
	if n.fixed != nil && rms(n.fixed) == 0 {
		s.notes = append(s.notes, Note{Code: "not-visible", Text: n.name + " falls outside the readings and was left out of the fit"})
		return
	}
	s.parts[series].extra = append(s.parts[series].extra, n)
}

// column evaluates f at every bin of a series.
func (p *seriesPart) column(f func(tH float64) float64) []float64 {
	v := make([]float64, len(p.TimeH))
	for i, t := range p.TimeH {
		v[i] = f(t)
	}
	return v
}

func (s *system) layOffsets() {
	for _, o := range s.in.Offsets {
		v := s.parts[o.Series].column(func(t float64) float64 {
			if t >= o.AtH && (o.ToH == 0 || t < o.ToH) {
				return 1
			}
			return 0
		})
		s.add(o.Series, nuisance{name: o.Name, unit: "mm", kind: kindOffset, prior: o.Prior, fixed: v})
	}
}

func (s *system) layDrifts() {
	for _, d := range s.in.Drifts {
		drift := func(t float64) float64 { return max(t-d.AtH, 0) / 24 }
		v := s.parts[d.Series].column(drift)
		s.parts[d.Series].fromBaseline(v, s.in.BaselineH, drift)
		s.add(d.Series, nuisance{name: d.Name, unit: "mm/d", kind: kindDrift, prior: d.Prior, fixed: v})
	}
	for i := range s.parts {
		if u := s.parts[i].ZeroU; u > 0 && len(s.parts[i].TimeH) > 0 {
			s.add(i, nuisance{name: "zero of " + s.parts[i].Name, unit: "mm", kind: kindZero,
				prior: &Knowledge{Value: 0, U: u}, fixed: s.parts[i].column(func(float64) float64 { return 1 })})
		}
	}
}

// fromBaseline takes off v, which is of at each bin, what it was when the
// series' zero was read.
func (p *seriesPart) fromBaseline(v []float64, baseline [2]float64, of func(tH float64) float64) {
	var base, n float64
	if baseline == [2]float64{} {
		for i, t := range p.TimeH {
			if t < p.Changes[0].AtH {
				base, n = base+v[i], n+1
			}
		}
	} else {
		base, n = of((baseline[0]+baseline[1])/2), 1
	}
	if n == 0 {
		base, n = of(p.Changes[0].AtH), 1
	}
	for i := range v {
		v[i] -= base / n
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
		for i := range s.parts {
			if rec.answers(i) && len(s.parts[i].TimeH) > 0 {
				s.add(i, nuisance{name: rec.Name + " on " + s.parts[i].Name, unit: "mm per unit", kind: kindAmbient, ambient: a, prior: rec.Prior})
			}
		}
	}
}

// linear is the number of linear unknowns, shapes 1 where the family has a
// shape parameter, rows the number of bins.
func (s *system) linear() int {
	n := len(s.fam.names)
	for i := range s.parts {
		n += len(s.parts[i].extra)
	}
	return n
}

func (s *system) shapes() int {
	if s.fam.shape == "" {
		return 0
	}
	return 1
}

func (s *system) rows() (n int) {
	for i := range s.parts {
		n += len(s.parts[i].TimeH)
	}
	return n
}

// at splits the search coordinates into shape and ln lags.
func (s *system) at(q []float64) (shape float64, lag []float64) {
	if s.shapes() == 1 && len(q) > 0 {
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

// columns returns copies of the columns of series i at q, not whitened: its
// own, and the law's.
func (s *system) columns(i int, q []float64) (own, law [][]float64) {
	shape, lag := s.at(q)
	p := &s.parts[i]
	law = copied(s.law(shape).value[i])
	for _, n := range p.extra {
		col := n.fixed
		if col == nil {
			col = s.ambientColumns(n.ambient, lag[n.ambient]).value[i]
		}
		own = append(own, append([]float64(nil), col...))
	}
	return own, law
}

// block returns series i at q, whitened by its noise.
func (s *system) block(i int, q []float64) lsq.AngularBlock {
	p := &s.parts[i]
	b := lsq.AngularBlock{Y: append([]float64(nil), p.SagMM...)}
	b.Private, b.Shared = s.columns(i, q)
	b.Priors = p.priors()
	p.noise.whitenAll(b.Private, b.Shared, [][]float64{b.Y})
	return b
}

// priors lists what is known of a series' own columns.
func (p *seriesPart) priors() (out []lsq.Prior) {
	for j, n := range p.extra {
		if n.prior != nil {
			out = append(out, lsq.Prior{Column: j, Value: n.prior.Value, U: n.prior.U})
		}
	}
	return out
}

// tangent returns the derivative of series i's fit by q[k], not whitened.
func (s *system) tangent(i, k int, q, law, own []float64) []float64 {
	p := &s.parts[i]
	shape, lag := s.at(q)
	out := make([]float64, len(p.TimeH))
	if k < s.shapes() {
		for j, slope := range s.law(shape).slope[i] {
			for r := range out {
				out[r] += law[j] * slope[r]
			}
		}
		return out
	}
	a := s.searched[k-s.shapes()]
	slope := s.ambientColumns(a, lag[a]).slope[i]
	for j, n := range p.extra {
		if n.kind == kindAmbient && n.ambient == a {
			for r := range out {
				out[r] += own[j] * slope[r]
			}
		}
	}
	return out
}

// residuals returns reading minus fit of every series, mm.
func (s *system) residuals(sol *solution) [][]float64 {
	out := make([][]float64, len(s.parts))
	for i := range s.parts {
		own, law := s.columns(i, sol.q)
		out[i] = append([]float64(nil), s.parts[i].SagMM...)
		subtract(out[i], law, sol.law)
		subtract(out[i], own, sol.own[i])
	}
	return out
}

// subtract takes columns times coefficients off v.
func subtract(v []float64, cols [][]float64, c []float64) {
	for j, x := range c {
		for r := range v {
			v[r] -= x * cols[j][r]
		}
	}
}

// names lists the law's coefficients, then the series' own unknowns, then
// search coordinates.
func (s *system) names() []string {
	out := append([]string(nil), s.fam.names...)
	for i := range s.parts {
		for _, n := range s.parts[i].extra {
			out = append(out, n.name)
		}
	}
	if s.shapes() == 1 {
		out = append(out, s.fam.shape)
	}
	for _, a := range s.searched {
		out = append(out, fmt.Sprintf("lag of %s", s.in.Ambient[a].Name))
	}
	return out
}
