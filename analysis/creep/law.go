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

// A term is one part of a law for a change of load that took ramp hours, at
// one shape parameter: the mean over the ramp of the part's response, (1/ramp)
// times its integral over the ages that the ramp's pieces have by now. What
// does not depend on the age is worked out once, for all readings. ramp 0 is a
// change at once; before the change the response is 0.
type term func(ramp, shape float64) response

// response is a term at one ramp and shape: its value and its derivative by
// the shape, age hours after the change began.
type response func(age float64) (value, slope float64)

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
func instant(ramp, _ float64) response {
	return func(age float64) (float64, float64) {
		switch {
		case age < 0 || age == 0 && ramp > 0:
			return 0, 0
		case age >= ramp:
			return 1, 0
		}
		return age / ramp, 0
	}
}

// flow is the term t.
func flow(ramp, _ float64) response {
	return func(age float64) (float64, float64) {
		if age <= 0 {
			return 0, 0
		}
		if ramp == 0 {
			return age, 0
		}
		lo, _, share := part(age, ramp)
		return share * (age + lo) / 2, 0
	}
}

// power is the term t^n; shape is n. Over a ramp it is
// (age^(n+1) - lo^(n+1)) / ((n+1) ramp), written so that nothing cancels: long
// after a short ramp by its series in ramp/age.
func power(ramp, n float64) response {
	p := n + 1
	c := [4]float64{-n / 2, n * (n - 1) / 6, -n * (n - 1) * (n - 2) / 24, n * (n - 1) * (n - 2) * (n - 3) / 120}
	d := [4]float64{-1. / 2, (2*n - 1) / 6, -((3*n-6)*n + 2) / 24, (((4*n-18)*n+22)*n - 6) / 120}
	return func(age float64) (float64, float64) {
		if age <= 0 {
			return 0, 0
		}
		ln := math.Log(age)
		t := math.Exp(n * ln)
		if ramp == 0 {
			return t, t * ln
		}
		_, width, share := part(age, ramp)
		x := width / age
		switch {
		case x >= 1: // the ramp still runs: the youngest part has age 0
			v := share * t / p
			return v, v * (ln - 1/p)
		case x < 2e-3: // the next term is below 1e-15
			v := 1 + x*(c[0]+x*(c[1]+x*(c[2]+x*c[3])))
			s := x * (d[0] + x*(d[1]+x*(d[2]+x*d[3])))
			return t * v, t * (v*ln + s)
		}
		l := math.Log1p(-x)
		e := -math.Expm1(p * l)
		v := share * t * e / (p * x)
		return v, v*ln + share*t/x*(-l*(1-e)/p-e/(p*p))
	}
}

// logarithm is the term ln(1 + t/tau); shape is ln tau.
func logarithm(ramp, shape float64) response {
	tau := math.Exp(shape)
	at := func(t float64) (float64, float64) { return math.Log1p(t / tau), -t / (t + tau) }
	// Integrals of ln(1+t/tau) and of its derivative by ln tau.
	value := func(t float64) float64 { return (t+tau)*math.Log1p(t/tau) - t }
	slope := func(t float64) float64 { return tau*math.Log1p(t/tau) - t }
	return func(age float64) (float64, float64) {
		if age <= 0 {
			return 0, 0
		}
		if ramp == 0 {
			return at(age)
		}
		lo, width, share := part(age, ramp)
		mid := lo + width/2
		if x := width / (mid + tau); x < 1e-3 {
			// Integral by the middle with its first correction; the next is
			// of the order of x^4.
			v, s := at(mid)
			bend := width * width / 24 / ((mid + tau) * (mid + tau))
			return share * (v - bend), share * (s + 2*tau*bend/(mid+tau))
		}
		return share * (value(age) - value(lo)) / width, share * (slope(age) - slope(lo)) / width
	}
}

// exponential is the term 1 - exp(-t/tau); shape is ln tau.
func exponential(ramp, shape float64) response {
	tau := math.Exp(shape)
	// meanOf is the mean of exp(-t/tau) over a ramp of x tau, at its end, and
	// what the slope takes from it.
	meanOf := func(x float64) (phi, loss float64) {
		if x == 0 {
			return 1, 0
		}
		phi = -math.Expm1(-x) / x
		return phi, phi - math.Exp(-x)
	}
	phi, loss := meanOf(ramp / tau)
	return func(age float64) (float64, float64) {
		switch {
		case age <= 0:
			return 0, 0
		case ramp == 0:
			y := age / tau
			e := math.Expm1(-y)
			return -e, -y * (1 + e)
		case age <= ramp:
			p, l := meanOf(age / tau)
			return age / ramp * (1 - p), -age / ramp * l
		}
		y := (age - ramp) / tau
		e := math.Exp(-y)
		return 1 - e*phi, -e * (y*phi + loss)
	}
}

// family is a law as a sum of terms that share one shape parameter at most.
type family struct {
	model Model
	terms []term
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
		f.terms, f.shape, f.shapeUnit, f.logShape = []term{instant, power}, "n", "1", false
		f.lower, f.upper = 0.02, 0.98
		f.units[1] = "mm/(N.h^n)"
	case Log:
		f.terms = []term{instant, logarithm}
	case StandardSolid:
		f.terms = []term{instant, exponential}
	case Burgers:
		f.terms = []term{instant, exponential, flow}
		f.names, f.units = append(f.names, "flow"), append(f.units, "mm/(N.h)")
	case KelvinChain:
		return chainFamily(tMin, tMax)
	default:
		panic("creep: unknown model " + string(m))
	}
	return f
}

// response is term j for one change.
func (f *family) response(j int, ramp, shape float64) response {
	if f.model == KelvinChain && j > 0 {
		shape = math.Log(f.taus[j-1])
	}
	return f.terms[j](ramp, shape)
}

// columns are the law's columns at the times t, h: by term, the sums over
// changes of change times term, and their derivatives by the shape.
func (f *family) columns(t []float64, changes []Change, shape float64) (value, slope [][]float64) {
	value, slope = make([][]float64, len(f.names)), make([][]float64, len(f.names))
	for j := range f.names {
		value[j], slope[j] = make([]float64, len(t)), make([]float64, len(t))
		for _, c := range changes {
			if c.Newton == 0 {
				continue
			}
			at := f.response(j, c.RampH, shape)
			for r := range t {
				if age := t[r] - c.AtH; age >= 0 {
					v, s := at(age)
					value[j][r] += c.Newton * v
					slope[j][r] += c.Newton * s
				}
			}
		}
	}
	return value, slope
}
