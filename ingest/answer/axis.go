package answer

import (
	"math"
	"strconv"
	"strings"
)

// Range is the figure's vertical range, a little wider than the curves; false
// where there is nothing to draw.
func (f *Figure) Range() (low, high float64, any bool) {
	if f.X1 <= f.X0 {
		return 0, 1, false
	}
	low, high = math.Inf(1), math.Inf(-1)
	for _, l := range f.Lines {
		for _, p := range l.Points {
			low, high, any = min(low, p[1]), max(high, p[1]), true
		}
	}
	if !any {
		return 0, 1, false
	}
	pad := max((high-low)*0.05, (f.Least-(high-low))/2)
	return low - pad, high + pad, true
}

// YTicks puts about n ticks at round values between low and high.
func YTicks(low, high float64, n int) []Tick {
	step, decimals := niceStep((high - low) / float64(n))
	var out []Tick
	first := math.Ceil(low/step - 1e-9)
	for k := range 4*n + 4 { // bounded, whatever the numbers
		v := (first + float64(k)) * step
		if !(v <= high+1e-9*step) {
			break
		}
		out = append(out, Tick{v, number(v, decimals)})
	}
	return out
}

// niceStep is 1, 2 or 5 times a power of ten, at least v, with its decimals.
func niceStep(v float64) (step float64, decimals int) {
	p := math.Floor(math.Log10(v))
	for _, m := range []float64{1, 2, 5, 10} {
		if step = m * math.Pow(10, p); step >= v*0.999 {
			break
		}
	}
	return step, max(0, int(math.Ceil(-math.Log10(step)-1e-9)))
}

// number prints a label of an axis with the true minus sign.
func number(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "−", 1)
}
