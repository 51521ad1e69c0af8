// Package creep holds the laws by which a specimen's compliance grows under
// load, and their integrals in closed form.
//
// A law is a relative compliance J(t)/J(0), 1 at t = 0, t in seconds since the
// load came. The sag under a load that changes follows by superposition
// (Boltzmann): the sum over all changes of the change times J of the time
// since. A change that takes a while (a ramp) uses the mean of J over it,
// which the integrals give exactly.
//
// The laws are those of Findley, Lai and Onaran, Creep and Relaxation of
// Nonlinear Viscoelastic Materials, chapters 4 and 5 (source of the formulas:
// from memory).
package creep

import (
	"fmt"
	"math"
)

// Law is a relative compliance. All amplitudes are shares of the compliance
// at once; J(t) = 1 + the sum of its terms. The zero Law does not creep.
type Law struct {
	// Power terms: Amplitude * (t/1 h)^N.
	Power []Power
	// Log terms: Amplitude * ln(1 + t/Tau).
	Log []Delayed
	// Kelvin terms: Amplitude * (1 - exp(-t/Tau)). One is a standard solid,
	// with Flow a Burgers body, several a Kelvin chain.
	Kelvin []Delayed
	// Flow is a steady growth in 1/s.
	Flow float64
	// Tertiary is an accelerating end; Amplitude 0 means none.
	Tertiary Tertiary
}

// Power is a power term.
type Power struct{ Amplitude, N float64 }

// Delayed is a term with a time of its own, Tau in s.
type Delayed struct{ Amplitude, Tau float64 }

// Tertiary is growth that accelerates once a load has hung for From seconds:
// Amplitude * (exp((t-From)/Growth) - 1), which starts with a kink of slope
// Amplitude/Growth.
type Tertiary struct{ Amplitude, From, Growth float64 }

// Check returns an error where a parameter lies outside its range.
func (l Law) Check() error {
	for _, p := range l.Power {
		if !(p.N > 0 && p.N < 1) || !(p.Amplitude >= 0) {
			return fmt.Errorf("a power law needs 0 < n < 1 and an amplitude not below 0; it has n %g, amplitude %g", p.N, p.Amplitude)
		}
	}
	for _, terms := range [][]Delayed{l.Log, l.Kelvin} {
		for _, d := range terms {
			if !(d.Tau > 0) || !(d.Amplitude >= 0) {
				return fmt.Errorf("a creep term needs tau above 0 and an amplitude not below 0; it has tau %g s, amplitude %g", d.Tau, d.Amplitude)
			}
		}
	}
	if !(l.Flow >= 0) {
		return fmt.Errorf("the flow must not be below 0; it is %g 1/s", l.Flow)
	}
	if t := l.Tertiary; t.Amplitude != 0 && (!(t.Amplitude > 0) || !(t.Growth > 0) || !(t.From >= 0)) {
		return fmt.Errorf("the tertiary stage needs an amplitude and a growth time above 0 and a start not below 0")
	}
	return nil
}

const hour = 3600.0

// At returns J(t)/J(0), t in s; 0 for t < 0.
func (l Law) At(t float64) float64 {
	if t < 0 {
		return 0
	}
	sum := 1 + l.Flow*t
	for _, p := range l.Power {
		sum += p.Amplitude * math.Pow(t/hour, p.N)
	}
	for _, d := range l.Log {
		sum += d.Amplitude * math.Log1p(t/d.Tau)
	}
	for _, d := range l.Kelvin {
		sum -= d.Amplitude * math.Expm1(-t/d.Tau)
	}
	if e := l.Tertiary; e.Amplitude > 0 && t > e.From {
		sum += e.Amplitude * math.Expm1((t-e.From)/e.Growth)
	}
	return sum
}

// Integral returns the integral of At from 0 to t, in s; 0 for t < 0.
func (l Law) Integral(t float64) float64 {
	if t < 0 {
		return 0
	}
	sum := t + l.Flow*t*t/2
	for _, p := range l.Power {
		sum += p.Amplitude * hour / (p.N + 1) * math.Pow(t/hour, p.N+1)
	}
	for _, d := range l.Log {
		sum += d.Amplitude * ((t+d.Tau)*math.Log1p(t/d.Tau) - t)
	}
	for _, d := range l.Kelvin {
		sum += d.Amplitude * (t + d.Tau*math.Expm1(-t/d.Tau))
	}
	if e := l.Tertiary; e.Amplitude > 0 && t > e.From {
		s := t - e.From
		sum += e.Amplitude * (e.Growth*math.Expm1(s/e.Growth) - s)
	}
	return sum
}

// Ramp returns the relative compliance for a load that grew evenly from a to
// b (s), seen at t (s): during the ramp only what has come so far counts.
func (l Law) Ramp(t, a, b float64) float64 {
	switch {
	case t <= a:
		return 0
	case b <= a:
		return l.At(t - a)
	case t < b:
		return l.Integral(t-a) / (b - a)
	}
	return (l.Integral(t-a) - l.Integral(t-b)) / (b - a)
}
