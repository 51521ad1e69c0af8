package calibrate

import (
	"fmt"
	"math"
	"slices"
)

// Value is a length with its standard uncertainty, mm.
type Value struct {
	MM float64 `json:"mm"`
	U  float64 `json:"u_mm"`
}

// Corrected is the true length behind an indication (mm):
// x = (y - offset) / gain, with
// u^2 = (u_r^2 + u_o^2 + x^2 u_g^2 + 2 x cov) / gain^2.
func (l *Line) Corrected(indication float64) Value {
	x := (indication - l.Offset) / l.Gain
	return Value{x, math.Sqrt(l.ReadingU*l.ReadingU+l.lineU2(x)) / math.Abs(l.Gain)}
}

// Difference is the true length between two indications of the gauge, to minus
// from (mm). The offset drops out, and with it its uncertainty:
// u^2 = (2 u_r^2 + x^2 u_g^2) / gain^2.
func (l *Line) Difference(from, to float64) Value {
	x := (to - from) / l.Gain
	return Value{x, math.Sqrt(2*l.ReadingU*l.ReadingU+x*x*l.UGain*l.UGain) / math.Abs(l.Gain)}
}

// Indicated is the line's value at a true length, mm; its uncertainty is the
// line's own, without that of a reading.
func (l *Line) Indicated(x float64) Value {
	return Value{l.Offset + l.Gain*x, math.Sqrt(l.lineU2(x))}
}

// lineU2 is the variance of the line at x.
func (l *Line) lineU2(x float64) float64 {
	v := l.UOffset*l.UOffset + x*x*l.UGain*l.UGain + 2*x*l.Correlation*l.UOffset*l.UGain
	return math.Max(v, 0) // rounding may leave a trace below nothing
}

// warn says what a careful reader would ask.
func (l *Line) warn(s Session) {
	say := func(code, format string, args ...any) {
		l.Warnings = append(l.Warnings, Warning{code, fmt.Sprintf(format, args...)})
	}
	if n := len(s.Points); n < LeastPoints {
		say("few-points", "%d points: common practice is %d or more, up and down", n, LeastPoints)
	}
	if l.Hysteresis == nil {
		say("one-way", "no block was taken both up and down, so hysteresis is not known")
	} else if h := math.Abs(l.Hysteresis.MM); h > 2*l.ReadingU && h > 2*s.Resolution {
		say("hysteresis", "the way down differs from the way up by %.4f\u202fmm at the block of %g\u202fmm: figures of recovery carry it", l.Hysteresis.MM, l.Hysteresis.BlockMM)
	}
	if !l.Curvature.LineEnough {
		say("not-straight", "a line is not enough (p = %.2g): the curve leaves its chord by %.4f\u202fmm in the middle; calibrate over the travel that the test will use, and no more", l.Curvature.P, l.Curvature.Bulge)
	}
	if math.Abs(l.Gain-1) > 0.01 {
		say("gain-far-off", "a gain of %.5f is far from 1: is a block wrong, or the gauge set to another unit?", l.Gain)
	}
	if len(s.Travel) == 2 {
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, p := range s.Points {
			lo, hi = math.Min(lo, p.ReadingMM), math.Max(hi, p.ReadingMM)
		}
		if hi-lo < 0.5*(s.Travel[1]-s.Travel[0]) {
			say("part-of-travel", "the blocks covered indications from %.3f\u202fmm to %.3f\u202fmm, less than half the travel of %g\u202fmm to %g\u202fmm: the line holds there only", lo, hi, s.Travel[0], s.Travel[1])
		}
	}
	if worst := slices.IndexFunc(l.Residuals, func(r float64) bool { return math.Abs(r) > 4*l.ReadingU }); worst >= 0 {
		say("outlier", "point %d (block %g\u202fmm) lies %.4f\u202fmm off the line: was it the right block, and clean?", worst+1, s.Points[worst].BlockMM, l.Residuals[worst])
	}
}
