package creep

import (
	"fmt"
	"math"
	"slices"

	"gaugelog/analysis/lsq"
)

// Label says how far a forecast may be trusted.
type Label string

// The labels, by decades of time beyond the data.
const (
	Plain       Label = "plain"       // to half a decade
	Caution     Label = "caution"     // to one decade
	Informative Label = "informative" // to two decades, or forced: not for acceptance
	Refused     Label = "refused"     // beyond two decades
)

// Forecast is the sag of the creep gauge had the creep step's load stayed.
type Forecast struct {
	AfterH float64 // after full load of the creep step, h
	// Decades beyond the data: log10 of AfterH over the time observed.
	Decades float64
	Label   Label
	// Refused is the reason, empty where a figure stands.
	Refused string
	Sag     Value   // mm, averaged over the laws; u is all of the parts below
	Lo, Hi  float64 // 95 % limits, mm
	// UWithin is the laws' own, UBetween the spread between them, UResidual
	// the correlated wander of the readings about the law, mm.
	UWithin, UBetween, UResidual float64
	ByModel                      []ByModel
}

// ByModel is one law's own forecast, mm.
type ByModel struct {
	Model Model
	Sag   Value
}

// MayStop is what more time would buy for one forecast.
type MayStop struct {
	MoreH     float64
	ForecastH float64
	// Width is that of the 95 % interval, mm; the spread between laws is
	// taken as it is now, so it is rather too wide than too narrow.
	Width float64
}

// label says how a forecast decades beyond the data is to be read, rounded
// to a hundredth of a decade: 1680 h after 167.7 h is one decade.
func label(decades float64) Label {
	decades = math.Round(decades*100) / 100
	switch {
	case decades <= 0.5:
		return Plain
	case decades <= 1:
		return Caution
	case decades <= 2:
		return Informative
	}
	return Refused
}

// steady returns the creep gauge's load history up to the creep step, which
// then stays.
func (in *Input) steady() []Change {
	c := in.Series[0].Changes
	n := 0
	for n < len(c) && c[n].AtH < in.EndH-1e-3 {
		n++
	}
	return c[:n]
}

// sagSteady is the sag at tH had the load stayed.
func (f *Fit) sagSteady(tH float64, steady []Change) Value {
	v, g := f.gradient(tH, steady)
	return Value{v, lsq.PropagateU(f.inner, g)}
}

func (a *Analysis) forecast(in *Input, o Options) {
	_, observed, _ := in.span()
	steady := in.steady()
	for _, after := range o.ForecastH {
		f := Forecast{AfterH: after, Decades: math.Log10(after / observed), ByModel: []ByModel{}}
		f.Label = label(f.Decades)
		if f.Label == Refused {
			switch {
			case !o.Beyond:
				f.Refused = fmt.Sprintf("%.1f decades beyond the data; no law can be trusted beyond two (--beyond forces it)", f.Decades)
			case a.admissibleLaws() < 2:
				f.Refused = fmt.Sprintf("%.1f decades beyond the data, and only one law to set side by side", f.Decades)
			default:
				f.Label = Informative
			}
		}
		if f.Refused == "" {
			a.fillForecast(&f, in.FullH+after, steady)
		}
		a.Forecast = append(a.Forecast, f)
	}
}

func (a *Analysis) admissibleLaws() (n int) {
	for _, c := range a.Candidates {
		if c.Admissible {
			n++
		}
	}
	return n
}

func (a *Analysis) fillForecast(f *Forecast, tH float64, steady []Change) {
	at := func(fit *Fit) Value { return fit.sagSteady(tH, steady) }
	f.Sag.Value, f.UWithin, f.UBetween = a.average(at)
	f.UResidual = a.Best.SlowMM
	f.Sag.U = math.Sqrt(f.UWithin*f.UWithin + f.UBetween*f.UBetween + f.UResidual*f.UResidual)
	k := a.Best.Coverage()
	f.Lo, f.Hi = f.Sag.Value-k*f.Sag.U, f.Sag.Value+k*f.Sag.U
	for _, c := range a.Candidates {
		if c.Admissible {
			f.ByModel = append(f.ByModel, ByModel{Model: c.Model, Sag: at(c.Fit)})
		}
	}
}

// mayStop fills MayStop and Shrunk for the farthest forecast that stands.
func (a *Analysis) mayStop(in *Input, o Options) {
	var far *Forecast
	for i := range a.Forecast {
		if f := &a.Forecast[i]; f.Refused == "" && (far == nil || f.AfterH > far.AfterH) {
			far = f
		}
	}
	if far == nil {
		return
	}
	more := o.MoreH
	if more == nil {
		more = []float64{24, 168, 720}
	}
	now := in.steadyEnd()
	if in.unloading() == nil {
		for _, m := range append([]float64{0}, more...) {
			if w, ok := a.widthAt(in, far, now+m); ok && in.FullH+far.AfterH > now+m {
				a.MayStop = append(a.MayStop, MayStop{MoreH: m, ForecastH: far.AfterH, Width: w})
			}
		}
	}
	for _, share := range []float64{0.1, 0.25, 0.5, 0.75, 1} {
		at := in.FullH + share*(now-in.FullH)
		if w, ok := a.widthAt(in, far, at); ok {
			a.Shrunk = append(a.Shrunk, MayStop{MoreH: at - now, ForecastH: far.AfterH, Width: w})
		}
	}
}

// steadyEnd is the end of what was read under the creep step's load.
func (in *Input) steadyEnd() float64 { return min(in.EndH, in.lastH()) }

// widthAt returns the width of the forecast's interval were the test read
// until untilH: from the best law's design at the bins there were, and
// beyond the last at bins 20 a decade.
func (a *Analysis) widthAt(in *Input, far *Forecast, untilH float64) (float64, bool) {
	f := a.Best
	if f.Model == KelvinChain || f.inner.At(0, 0) == 0 {
		return 0, false
	}
	plan := in.until(math.Min(untilH, in.steadyEnd()) + 1e-9)
	plan.EndH = untilH
	plan.Series = slices.Clone(plan.Series)
	for i := range plan.Series {
		plan.Series[i].extend(in.FullH, untilH)
	}
	_, lag := f.sys.at(f.sol.q)
	s := newSystem(&plan, f.fam, lag)
	s.holdLaw(f.linear, f.shape)
	sol := *f.sol
	sol.own = nil
	for i := range s.parts {
		p, n := &s.parts[i], f.sys.parts[i].noise
		p.noise = newNoise(p.TimeH, p.U, n.scale, n.slow, n.fadeH)
		if len(p.extra) != len(f.sys.parts[i].extra) {
			return 0, false
		}
		sol.own = append(sol.own, f.sol.own[i])
	}
	if nq := s.shapes() + len(s.searched); nq < len(sol.q) {
		sol.q, sol.atBound = sol.q[:nq], sol.atBound[:nq]
	}
	l, kept := s.linearise(&sol)
	var reduced []lsq.Reduced
	for i := range s.parts {
		reduced = append(reduced, l.reduce(i, s.parts[i].noise))
	}
	x, err := lsq.Join(reduced, l.n, nil)
	if err != nil || !finite(x.LogDet) {
		return 0, false
	}
	_, own := f.gradient(in.FullH+far.AfterH, in.steady())
	g := make([]float64, l.n)
	copy(g, own[:len(f.fam.names)])
	if f.fam.shape != "" && len(kept) > 0 && kept[0] == 0 {
		g[len(f.fam.names)] = own[len(f.fam.names)]
	}
	u := lsq.PropagateU(x.SharedCovariance(), g) * math.Sqrt(f.widening)
	total := math.Sqrt(u*u + far.UBetween*far.UBetween + far.UResidual*far.UResidual)
	return 2 * f.Coverage() * total, finite(total)
}

// extend adds bins 20 a decade from the last to untilH, as uncertain as the
// last ten were.
func (s *Series) extend(fullH, untilH float64) {
	n := len(s.TimeH)
	if n == 0 || s.TimeH[n-1] >= untilH {
		return
	}
	u := lsq.Median(s.U[max(0, n-10):])
	s.TimeH, s.SagMM, s.U = slices.Clone(s.TimeH), slices.Clone(s.SagMM), slices.Clone(s.U)
	s.N = nil
	for age := s.TimeH[n-1] - fullH; age > 0; {
		age *= math.Pow(10, 1.0/20)
		if fullH+age > untilH {
			break
		}
		s.TimeH, s.SagMM, s.U = append(s.TimeH, fullH+age), append(s.SagMM, 0), append(s.U, u)
	}
	if s.TimeH[len(s.TimeH)-1] < untilH {
		s.TimeH, s.SagMM, s.U = append(s.TimeH, untilH), append(s.SagMM, 0), append(s.U, u)
	}
}
