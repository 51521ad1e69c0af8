package creep

import (
	"fmt"
	"math"
	"strings"

	"gaugelog/analysis/lsq"
)

// remark says in words what a reader must know of the fit.
func (f *Fit) remark() {
	sol := f.sol
	note := func(code, format string, args ...any) {
		f.Notes = append(f.Notes, Note{Code: code, Text: fmt.Sprintf(format, args...)})
	}
	in := f.sys.in
	if sol.status == lsq.Unidentifiable {
		note("not-identifiable", "%s: %s cannot be told apart; no uncertainty can be given, and no forecast", f.Model, strings.Join(sol.unclear, ", "))
	}
	if sol.status == lsq.Stalled || sol.status == lsq.IterationLimit {
		note("search-"+strings.ReplaceAll(sol.status.String(), " ", "-"), "%s: the search for the law did not come to rest; take its figures with caution", f.Model)
	}
	for _, p := range f.Parameters {
		if p.AtBound && p.Name == f.fam.shape {
			unit := " " + p.Unit
			if p.Unit == "1" {
				unit = ""
			}
			note(p.Name+"-at-bound", "%s: %s ran to its bound, %.4g%s; the law does not suit these readings or they are too few to fix it", f.Model, p.Name, p.Value, unit)
		}
	}
	if c := lsq.Correlation(f.inner, 0, 1); f.Model != KelvinChain && math.Abs(c) > 0.999 {
		note("d0-d1-degenerate", "%s: d0 and d1 are correlated by %.5f: d0 is what the law gives for time zero, not the elastic sag", f.Model, c)
	}
	if f.Model == Burgers || f.Model == StandardSolid || f.Model == Log || f.Model == Power {
		for _, p := range f.Parameters {
			if p.Value < 0 && p.Name != "d0" {
				note("negative-"+p.Name, "%s: %s is negative, which no steady load does; the law is not used for forecasts", f.Model, p.Name)
			}
		}
	}
	tMin, tMax, n := in.span()
	if tMax < 10*tMin || tMax < 0.5 {
		note("hold-too-short", "the creep step was read from %.3g h to %.3g h after full load only; the law's shape is little known", tMin, tMax)
	}
	if tMin > 1 {
		note("sparse-readings", "the first of %d readings in the creep step came %.3g h after full load; what crept before is extrapolated backward", n, tMin)
	}
}

// admissible reports whether the law may be used for forecasts: nothing in
// it sinks with time, and its uncertainty is known.
func (f *Fit) admissible() bool {
	if f.Status == lsq.Unidentifiable {
		return false
	}
	for _, p := range f.Parameters {
		if p.Value < 0 && p.Name != "d0" {
			return false
		}
	}
	return true
}
