package calibrate

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"gaugelog/analysis/lsq"
)

// BlockExpansion is the linear expansion of steel gauge blocks per kelvin,
// ISO 3650's 11.5e-6 (from memory; the standard grants 1e-6 either way).
const BlockExpansion = 11.5e-6

// LeastPoints is the number of points from which a session is taken to be
// whole without a word (common practice: ten or more, up and down).
const LeastPoints = 10

// Line is a gauge's calibration: indication = Offset + Gain * true.
type Line struct {
	Offset  float64 `json:"offset_mm"`
	Gain    float64 `json:"gain"`
	UOffset float64 `json:"u_offset_mm"`
	UGain   float64 `json:"u_gain"`
	// Correlation of offset and gain, -1..1.
	Correlation float64 `json:"correlation"`
	// ReadingU is the standard uncertainty of one indication, mm: the
	// residuals' standard deviation (hysteresis and curvature included as far
	// as the session showed them), or the resolution over sqrt(12) where that
	// is more.
	ReadingU   float64 `json:"reading_u_mm"`
	ResidualSD float64 `json:"residual_sd_mm"`
	DOF        int     `json:"dof"`
	// Residuals are indication minus line, mm, in the points' order.
	Residuals []float64 `json:"residuals_mm"`
	// True holds the blocks' lengths at their temperature, mm.
	True []float64 `json:"true_mm"`
	// Hysteresis is nil where no block was taken both ways.
	Hysteresis *Hysteresis `json:"hysteresis,omitempty"`
	// Repeatability is nil where no block was taken twice the same way.
	Repeatability *Repeatability `json:"repeatability,omitempty"`
	Curvature     Curvature      `json:"curvature"`
	Warnings      []Warning      `json:"warnings"`
}

// Hysteresis is the greatest difference between the mean indications of the
// way down and of the way up at one block, mm; its sign is down minus up.
type Hysteresis struct {
	MM      float64 `json:"mm"`
	BlockMM float64 `json:"block_mm"`
	Blocks  int     `json:"blocks"` // taken both ways
}

// Repeatability is the standard deviation of repeats at one block in one
// direction, pooled, mm.
type Repeatability struct {
	SD  float64 `json:"sd_mm"`
	DOF int     `json:"dof"`
}

// Curvature is the test of a quadratic term beside the line.
type Curvature struct {
	// Coefficient is that of true^2, 1/mm, with its standard uncertainty.
	Coefficient float64 `json:"coefficient_per_mm"`
	U           float64 `json:"u_per_mm"`
	// P is the probability of so great a term if the gauge were straight.
	P float64 `json:"p"`
	// Bulge is how far the curve leaves its own chord in the middle, mm.
	Bulge float64 `json:"bulge_mm"`
	// LineEnough is false where P is below 5 %.
	LineEnough bool `json:"line_enough"`
}

// Warning is something the reader of the figures must know.
type Warning struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Fit works out the line. Errors say what the session lacks.
func Fit(s Session) (*Line, error) {
	if err := s.check(); err != nil {
		return nil, err
	}
	x, y := s.lengths(), make([]float64, len(s.Points))
	for i, p := range s.Points {
		y[i] = p.ReadingMM
	}
	design := lsq.Polynomial(x, 1)
	sol, err := lsq.Solve(lsq.Problem{Design: design, Y: y, Names: []string{"offset", "gain"}})
	if err != nil {
		return nil, fmt.Errorf("no line through the points: %w", err)
	}
	l := &Line{
		Offset: sol.X[0], Gain: sol.X[1], Residuals: sol.Residuals, True: x, DOF: sol.DOF,
		ResidualSD: sol.ResidualSD(), Warnings: []Warning{},
	}
	l.ReadingU = math.Max(l.ResidualSD, s.Resolution/math.Sqrt(12))
	l.covary(s, design, sol)
	l.Hysteresis = hysteresis(s.Points)
	l.Repeatability = repeatability(s.Points)
	if l.Curvature, err = curvature(x, y, s.Resolution/math.Sqrt(12)); err != nil {
		return nil, err
	}
	l.warn(s)
	return l, nil
}

func (s *Session) check() error {
	if !(s.Resolution > 0) || math.IsInf(s.Resolution, 0) {
		return errors.New("a gauge's resolution must be more than 0 mm")
	}
	if s.BlockU < 0 || math.IsNaN(s.BlockU) || math.IsInf(s.BlockU, 0) {
		return fmt.Errorf("a block's uncertainty of %g\u202fmm does not exist", s.BlockU)
	}
	if s.BlockCelsius != nil && !(*s.BlockCelsius > -50 && *s.BlockCelsius < 100) {
		return fmt.Errorf("blocks at %g\u202fC are not for measuring", *s.BlockCelsius)
	}
	blocks := map[float64]bool{}
	for i, p := range s.Points {
		if bad(p.BlockMM) || bad(p.ReadingMM) {
			return fmt.Errorf("point %d is no pair of numbers", i+1)
		}
		if p.Direction != Up && p.Direction != Down {
			return fmt.Errorf("point %d: direction %q is neither up nor down", i+1, p.Direction)
		}
		blocks[p.BlockMM] = true
	}
	if len(blocks) < 3 {
		return fmt.Errorf("%d different block lengths are too few for a line and its residuals: take at least 3, better %d points up and down over the travel to be used", len(blocks), LeastPoints)
	}
	return nil
}

func bad(v float64) bool { return math.IsNaN(v) || math.IsInf(v, 0) }

// lengths are the blocks' lengths at their temperature.
func (s *Session) lengths() []float64 {
	x := make([]float64, len(s.Points))
	for i, p := range s.Points {
		x[i] = p.BlockMM
		if s.BlockCelsius != nil {
			x[i] *= 1 + BlockExpansion*(*s.BlockCelsius-20)
		}
	}
	return x
}

// covary fills in the uncertainties: the scatter's, and beside it the blocks'
// own errors, each common to all points at its block.
func (l *Line) covary(s Session, design *mat.Dense, sol *lsq.Solution) {
	var c mat.SymDense
	c.ScaleSym(l.ReadingU*l.ReadingU, sol.Covariance)
	if s.BlockU > 0 {
		var weights mat.Dense // d(offset, gain) / d(reading)
		weights.Mul(sol.Covariance, design.T())
		moved := map[float64][2]float64{}
		for i, p := range s.Points {
			m := moved[p.BlockMM]
			moved[p.BlockMM] = [2]float64{m[0] + weights.At(0, i), m[1] + weights.At(1, i)}
		}
		blocks := make([]float64, 0, len(moved))
		for b := range moved {
			blocks = append(blocks, b)
		}
		slices.Sort(blocks) // a fixed order of summing
		u2 := math.Pow(l.Gain*s.BlockU, 2)
		for _, b := range blocks {
			m := moved[b]
			for r := range 2 {
				for k := r; k < 2; k++ {
					c.SetSym(r, k, c.At(r, k)+u2*m[r]*m[k])
				}
			}
		}
	}
	l.UOffset, l.UGain = math.Sqrt(c.At(0, 0)), math.Sqrt(c.At(1, 1))
	l.Correlation = lsq.Correlation(&c, 0, 1)
}

// curvature fits a parabola and judges its quadratic term by Student's t; the
// scatter counts as at least floor.
func curvature(x, y []float64, floor float64) (Curvature, error) {
	if len(x) < 4 {
		return Curvature{P: 1, LineEnough: true}, nil
	}
	sol, err := lsq.Solve(lsq.Problem{Design: lsq.Polynomial(x, 2), Y: y, Names: []string{"offset", "gain", "curvature"}})
	if err != nil {
		return Curvature{}, fmt.Errorf("whether the gauge is straight cannot be told: %w", err)
	}
	c := Curvature{Coefficient: sol.X[2], U: math.Max(sol.ResidualSD(), floor) * sol.U(2)}
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(sol.DOF)}
	c.P = 2 * t.Survival(math.Abs(c.Coefficient)/c.U)
	span := slices.Max(x) - slices.Min(x)
	c.Bulge = c.Coefficient * span * span / 4
	c.LineEnough = c.P >= 0.05
	return c, nil
}

// hysteresis compares the two ways at each block that was taken both ways.
func hysteresis(points []Point) *Hysteresis {
	var h *Hysteresis
	both := 0
	for _, g := range group(points) {
		if len(g.up) == 0 || len(g.down) == 0 {
			continue
		}
		both++
		if d := meanOf(g.down) - meanOf(g.up); h == nil || math.Abs(d) > math.Abs(h.MM) {
			h = &Hysteresis{MM: d, BlockMM: g.block}
		}
	}
	if h != nil {
		h.Blocks = both
	}
	return h
}

func repeatability(points []Point) *Repeatability {
	ss, dof := 0.0, 0
	for _, g := range group(points) {
		for _, v := range [][]float64{g.up, g.down} {
			if len(v) < 2 {
				continue
			}
			m := meanOf(v)
			for _, r := range v {
				ss += (r - m) * (r - m)
			}
			dof += len(v) - 1
		}
	}
	if dof == 0 {
		return nil
	}
	return &Repeatability{SD: math.Sqrt(ss / float64(dof)), DOF: dof}
}

// atBlock are the indications at one block.
type atBlock struct {
	block    float64
	up, down []float64
}

func group(points []Point) []atBlock {
	var out []atBlock
	for _, p := range points {
		i := slices.IndexFunc(out, func(g atBlock) bool { return g.block == p.BlockMM })
		if i < 0 {
			out = append(out, atBlock{block: p.BlockMM})
			i = len(out) - 1
		}
		if p.Direction == Down {
			out[i].down = append(out[i].down, p.ReadingMM)
		} else {
			out[i].up = append(out[i].up, p.ReadingMM)
		}
	}
	slices.SortFunc(out, func(a, b atBlock) int {
		if a.block < b.block {
			return -1
		}
		return 1
	})
	return out
}

func meanOf(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}
