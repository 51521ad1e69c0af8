package stiffness

import (
	"math"

	"gaugelog/analysis/lsq"

	"gonum.org/v1/gonum/mat"
)

// Quantity is a figure with its uncertainty, by the law of propagation
// (JCGM 100:2008). A U of 0 means that no uncertainty is known.
type Quantity struct {
	Value float64
	U     float64 // standard uncertainty, in the value's unit
	DOF   float64 // effective degrees of freedom (Welch-Satterthwaite); 0 for many
	K     float64 // coverage factor for 95 %
	U95   float64 // K times U
}

// Line is one input's part in a figure's uncertainty.
type Line struct {
	Input string
	Type  string // "A" | "B"
	// Distribution is what the Monte Carlo draws from: "normal", "rectangular"
	// or "t" (few degrees of freedom).
	Distribution string
	Unit         string  // of the input
	U            float64 // standard uncertainty of the input, in Unit
	DOF          float64 // 0 for many
	Sensitivity  float64 // change of the figure per unit of the input
	Share        float64 // of the figure's variance, 0..1
	Source       string
}

// figure is something computed from the unknowns and the state.
type figure func(theta []float64, st *state) float64

// propagate carries all errors to a figure: through the unknowns and, where
// the figure uses the input itself (a depth in E = EI/I), directly.
func (f *fitted) propagate(fig figure) (Quantity, []Line) {
	value := fig(f.theta, f.best)
	grad := f.gradient(fig)
	var reach mat.VecDense // change of the figure per unit of each reading
	if by := f.learned(fig); by != 0 {
		// What is learned of the shear is learned from what the fit leaves over.
		var left mat.VecDense
		left.MulVec(f.x.T(), f.shear)
		for j := range grad {
			grad[j] -= by * left.AtVec(j)
		}
		reach.MulVec(f.gain.T(), mat.NewVecDense(len(grad), grad))
		reach.AddScaledVec(&reach, by, f.shear)
	} else {
		reach.MulVec(f.gain.T(), mat.NewVecDense(len(grad), grad))
	}
	reading := f.birge * math.Sqrt(math.Max(0, mat.Inner(&reach, f.read, &reach)))
	lines := []Line{f.readingLine(&reach, reading)}
	for c, cs := range f.causes {
		h := cs.u / 10
		up, down := f.best.clone(), f.best.clone()
		cs.move(up, h)
		cs.move(down, -h)
		s := (fig(f.theta, up) - fig(f.theta, down)) / (2 * h)
		s -= mat.Dot(&reach, f.jac.ColView(c))
		lines = append(lines, Line{Input: cs.name, Type: cs.kind, Distribution: cs.distribution(), Unit: cs.unit, U: cs.u, DOF: cs.dof, Sensitivity: s, Source: cs.source})
	}
	lines = append(lines, f.priorLines(grad)...)
	return combine(value, lines)
}

// readingLine puts the readings' own errors in one line; its degrees of
// freedom are those of the scatter where the uncertainties were widened by
// it, else Welch and Satterthwaite's from the single readings'.
func (f *fitted) readingLine(reach *mat.VecDense, u float64) Line {
	pooled := 0.0
	for r := range f.m.rows {
		pooled += f.read.At(r, r) / float64(len(f.m.rows))
	}
	pooled = math.Sqrt(pooled)
	l := Line{Input: "readings", Type: "A", Distribution: "normal", Unit: "mm", U: pooled, Sensitivity: u / pooled,
		Source: "scatter, resolution and stated error of the single increments (pooled; the sensitivity is that of all together)"}
	if f.birge > 1 {
		l.DOF, l.Source = float64(f.sol.DOF), l.Source+", widened by the fit's scatter"
		return l
	}
	var sum float64
	for r, o := range f.m.rows {
		if o.dof > 0 {
			sum += math.Pow(reach.AtVec(r)*o.u, 4) / o.dof
		}
	}
	if sum > 0 {
		l.DOF = math.Pow(u, 4) / sum
	}
	return l
}

// priorLines are the parts of stated compliances that were fitted as well.
func (f *fitted) priorLines(grad []float64) []Line {
	var out []Line
	for _, p := range f.priors() {
		s := 0.0
		for j, g := range grad {
			s += g * f.sol.Covariance.At(j, p.Column) / (p.U * p.U)
		}
		name := f.m.rig.Supports[f.m.yields[p.Column-f.m.firstYield()]].Name
		out = append(out, Line{Input: "compliance of support " + name, Type: "B", Distribution: "normal", Unit: "mm/N", U: p.U, Sensitivity: s, Source: "stated in the rig file"})
	}
	return out
}

// gradient is the figure's derivatives by the unknowns.
func (f *fitted) gradient(fig figure) []float64 {
	grad := make([]float64, len(f.theta))
	for j := range grad {
		h := 1e-4 * math.Sqrt(f.sol.Covariance.At(j, j))
		h = math.Max(h, 1e-7*math.Abs(f.theta[j]))
		if h == 0 {
			continue
		}
		t := append([]float64(nil), f.theta...)
		t[j] = f.theta[j] + h
		up := fig(t, f.best)
		t[j] = f.theta[j] - h
		grad[j] = (up - fig(t, f.best)) / (2 * h)
	}
	return grad
}

// combine adds independent lines, fills their shares and finds effective
// degrees of freedom and coverage (JCGM 100:2008, G.4).
func combine(value float64, lines []Line) (Quantity, []Line) {
	var sum, fourth float64
	for _, l := range lines {
		v := l.Sensitivity * l.U
		sum += v * v
		if l.DOF > 0 {
			fourth += v * v * v * v / l.DOF
		}
	}
	q := Quantity{Value: value, U: math.Sqrt(sum)}
	dof := math.Inf(1)
	if fourth > 0 {
		dof = sum * sum / fourth
		q.DOF = dof
	}
	q.K = lsq.Coverage95(dof)
	q.U95 = q.K * q.U
	for i := range lines {
		if sum > 0 {
			v := lines[i].Sensitivity * lines[i].U
			lines[i].Share = v * v / sum
		}
	}
	return q, lines
}
