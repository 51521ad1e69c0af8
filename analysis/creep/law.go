package creep

import "math"

// Model names a family of laws.
type Model string

// The families, J in mm/N with t in h.
const (
	Power         Model = "power"          // d0 + d1 t^n (Findley)
	Log           Model = "log"            // d0 + d1 ln(1 + t/tau)
	StandardSolid Model = "standard-solid" // d0 + d1 (1 - exp(-t/tau))
	Burgers       Model = "burgers"        // standard solid + flow t
	KelvinChain   Model = "kelvin-chain"   // d0 + sum dj (1 - exp(-t/tauj)), tauj fixed
)

// Models lists the families in the order in which they are tried.
func Models() []Model { return []Model{Power, Log, StandardSolid, Burgers, KelvinChain} }

// response is the mean over a ramp of a law's term: for a change that began
// age hours ago and took ramp hours, (1/ramp) times the integral of the term
// over the ages its parts have by now. It returns the value and the
// derivative by the shape parameter. ramp 0 is a change at once; before the
// change both are 0.
type response func(age, ramp, shape float64) (value, slope float64)

// part splits a ramp: lo is the age of its youngest part that is already
// there to count (0 while the ramp runs), width the span of ages present, and
// share the share of the load already on.
func part(age, ramp float64) (lo, width, share float64) {
	if age <= ramp {
		return 0, age, age / ramp
	}
	return age - ramp, ramp, 1
}

// instant is the term 1: what is there at once.
func instant(age, ramp, _ float64) (float64, float64) {
	switch {
	case age < 0 || age == 0 && ramp > 0:
		return 0, 0
	case age >= ramp:
		return 1, 0
	}
	return age / ramp, 0
}

// flow is the term t.
func flow(age, ramp, _ float64) (float64, float64) {
	if age <= 0 {
		return 0, 0
	}
	if ramp == 0 {
		return age, 0
	}
	lo, _, share := part(age, ramp)
	return share * (age + lo) / 2, 0
}

// power is the term t^n; shape is n. Over a ramp it is
// (age^(n+1) - lo^(n+1)) / ((n+1) ramp), written so that nothing cancels.
func power(age, ramp, n float64) (float64, float64) {
	if age <= 0 {
		return 0, 0
	}
	t := math.Pow(age, n)
	if ramp == 0 {
		return t, t * math.Log(age)
	}
	_, width, share := part(age, ramp)
	x, p := width/age, n+1
	if x >= 1 { // the ramp still runs: the youngest part has age 0
		v := share * t / p
		return v, v * (math.Log(age) - 1/p)
	}
	l := math.Log1p(-x)
	e := -math.Expm1(p * l)
	v := share * t * e / (p * x)
	return v, v*math.Log(age) + share*t/x*(-l*(1-e)/p-e/(p*p))
}

// logarithm is the term ln(1 + t/tau); shape is ln tau.
func logarithm(age, ramp, shape float64) (float64, float64) {
	if age <= 0 {
		return 0, 0
	}
	tau := math.Exp(shape)
	at := func(t float64) (float64, float64) { return math.Log1p(t / tau), -t / (t + tau) }
	if ramp == 0 {
		return at(age)
	}
	lo, width, share := part(age, ramp)
	mid := lo + width/2
	if x := width / (mid + tau); x < 1e-3 {
		// Integral by the middle with its first correction; the next is
		// of the order of x^4.
		v, s := at(mid)
		second := -1 / ((mid + tau) * (mid + tau))
		return share * (v + width*width/24*second), share * (s + width*width/24*2*tau/math.Pow(mid+tau, 3))
	}
	// Integrals of ln(1+t/tau) and of its derivative by ln tau.
	value := func(t float64) float64 { return (t+tau)*math.Log1p(t/tau) - t }
	slope := func(t float64) float64 { return tau*math.Log1p(t/tau) - t }
	return share * (value(age) - value(lo)) / width, share * (slope(age) - slope(lo)) / width
}

// exponential is the term 1 - exp(-t/tau); shape is ln tau.
func exponential(age, ramp, shape float64) (float64, float64) {
	if age <= 0 {
		return 0, 0
	}
	tau := math.Exp(shape)
	if ramp == 0 {
		e := math.Exp(-age / tau)
		return -math.Expm1(-age / tau), -age / tau * e
	}
	lo, width, share := part(age, ramp)
	x, e := width/tau, math.Exp(-lo/tau)
	phi := 1.0
	if x > 0 {
		phi = -math.Expm1(-x) / x
	}
	return share * (1 - e*phi), -share * e * (lo/tau*phi + phi - math.Exp(-x))
}

// family is a law as a sum of terms that share one shape parameter at most.
type family struct {
	model Model
	terms []response
	names []string // of the terms' coefficients
	units []string
	// shape is the name of the shape parameter; empty: none. logShape says
	// that the search runs over its logarithm.
	shape     string
	shapeUnit string
	logShape  bool
	// lower and upper bound the search coordinate.
	lower, upper float64
	// taus of a chain, h, the number of parameters its last fit used, and its
	// smoothing.
	taus              []float64
	effective, lambda float64
}

// familyOf returns a family for readings between tMin and tMax hours after a
// change of load.
func familyOf(m Model, tMin, tMax float64) family {
	f := family{model: m, shape: "tau", shapeUnit: "h", logShape: true,
		lower: math.Log(tMin / 10), upper: math.Log(tMax * 10),
		names: []string{"d0", "d1"}, units: []string{"mm/N", "mm/N"}}
	switch m {
	case Power:
		f.terms, f.shape, f.shapeUnit, f.logShape = []response{instant, power}, "n", "1", false
		f.lower, f.upper = 0.02, 0.98
		f.units[1] = "mm/(N.h^n)"
	case Log:
		f.terms = []response{instant, logarithm}
	case StandardSolid:
		f.terms = []response{instant, exponential}
	case Burgers:
		f.terms = []response{instant, exponential, flow}
		f.names, f.units = append(f.names, "flow"), append(f.units, "mm/(N.h)")
	case KelvinChain:
		return chainFamily(tMin, tMax)
	default:
		panic("creep: unknown model " + string(m))
	}
	return f
}

// term evaluates term j for one change.
func (f *family) term(j int, age, ramp, shape float64) (value, slope float64) {
	if f.model == KelvinChain && j > 0 {
		return exponential(age, ramp, math.Log(f.taus[j-1]))
	}
	return f.terms[j](age, ramp, shape)
}

// columns returns the sums over changes of change times term at time t, and
// their derivatives by the shape, into value and slope (length of terms).
func (f *family) columns(t float64, changes []Change, shape float64, value, slope []float64) {
	clear(value)
	clear(slope)
	for _, c := range changes {
		age := t - c.AtH
		if age < 0 || c.Newton == 0 {
			continue
		}
		for j := range f.names {
			v, s := f.term(j, age, c.RampH, shape)
			value[j] += c.Newton * v
			slope[j] += c.Newton * s
		}
	}
}
