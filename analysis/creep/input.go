package creep

import (
	"errors"
	"fmt"
	"math"
)

// Change is a change of load.
type Change struct {
	AtH   float64 // begin of the ramp, h
	RampH float64 // length of the ramp, h; 0: at once
	// Newton is the change as an equivalent total load in the creep step's
	// loading pattern: the load of that pattern that would give this gauge
	// the same sag at once. Negative where load is taken off.
	Newton float64
	// U is the standard uncertainty of AtH, h; 0: exact. The readings fix it
	// better where they follow closely.
	U float64
}

// Series is one gauge's sag over the whole test, in bins about equally
// spaced in the logarithm of time since the last change.
type Series struct {
	Name  string
	TimeH []float64 // rising, h
	SagMM []float64 // net sag, mm, offsets not yet removed where Offsets name them
	U     []float64 // standard uncertainty of each bin by its scatter, mm, positive
	N     []int     // readings in each bin; nil: 1 each
	// Changes is the load history as this gauge feels it, in order of time.
	Changes []Change
	// Parts splits every change's Newton by load (changes by loads); nil where
	// that is not known. PartU is the relative standard uncertainty of each
	// load's effect on this gauge, compared with what the load has on the
	// creep gauge in the creep step's pattern; 0: exact.
	Parts [][]float64
	PartU float64
	// ZeroU is the standard uncertainty of the series' zero (mm), common to
	// all its bins; 0: exact.
	ZeroU float64
	// ResolutionMM is the step of the gauge's readings, mm; 0: exact.
	ResolutionMM float64
}

// Knowledge is a value known beforehand with its standard uncertainty.
type Knowledge struct{ Value, U float64 }

// Offset is a jump of one series by an unknown amount (mm) that was no
// change of load: a knock, a pressed zero.
type Offset struct {
	Name   string
	Series int
	AtH    float64
	// ToH ends it where it was temporary; 0: it stays.
	ToH   float64
	Prior *Knowledge // mm; nil: nothing known
}

// Drift is a straight drift of one series at an unknown rate (mm/d),
// counted from AtH. A straight drift cannot be told from slow creep by one
// gauge alone: give a Prior unless another series separates them.
type Drift struct {
	Name   string
	Series int
	AtH    float64
	Prior  *Knowledge // mm/d
}

// Ambient is a record of temperature or humidity to which gauges may answer
// through a first-order lag.
type Ambient struct {
	Name  string
	TimeH []float64 // rising, h
	Value []float64 // degree Celsius or per cent
	// Series that answer, each with a coefficient of its own; nil: all.
	Series []int
	// LagH bounds the search of the lag, h; {0, 0}: 0.1 to 12 h. Equal
	// bounds fix the lag.
	LagH [2]float64
	// Prior of each coefficient, mm per unit; nil: nothing known.
	Prior *Knowledge
}

// Input is what a fit is made from. Series[0] is the creep gauge.
type Input struct {
	Series  []Series
	Offsets []Offset
	Drifts  []Drift
	Ambient []Ambient
	// FullH is the instant of full load of the creep step; EndH its end (the
	// unloading, or the last reading). h.
	FullH, EndH float64
	// LoadN is the total load of the creep step, N.
	LoadN float64
	// InitialH is the time after full load at which the initial sag is
	// taken, h; 0: one minute.
	InitialH float64
	// BaselineH is when the zeros of the series were read, h; {0, 0}: in all bins
	// before the first change.
	BaselineH [2]float64
	// LimitMM is the sag of the creep gauge that must not be reached; the watch
	// for acceleration warns when it is a day away. 0: none.
	LimitMM float64
}

// lastH is the end of the record.
func (in *Input) lastH() float64 {
	last := math.Inf(-1)
	for _, s := range in.Series {
		if n := len(s.TimeH); n > 0 {
			last = max(last, s.TimeH[n-1])
		}
	}
	return last
}

// initialH is InitialH with its default.
func (in *Input) initialH() float64 {
	if in.InitialH > 0 {
		return in.InitialH
	}
	return 1.0 / 60
}

// validate reports the first thing wrong.
func (in *Input) validate() error {
	if len(in.Series) == 0 {
		return errors.New("no gauge to fit a creep law to")
	}
	for i := range in.Series {
		if err := in.Series[i].validate(); err != nil {
			return fmt.Errorf("gauge %s: %w", in.Series[i].Name, err)
		}
	}
	if !finite(in.FullH) || !finite(in.EndH) || in.EndH <= in.FullH {
		return fmt.Errorf("the creep step runs from %g h to %g h; it must end after it begins", in.FullH, in.EndH)
	}
	for _, o := range in.Offsets {
		if o.Series < 0 || o.Series >= len(in.Series) || !finite(o.AtH) || !o.Prior.ok() {
			return fmt.Errorf("offset %s: no such gauge, or its time or prior is not a number", o.Name)
		}
	}
	for _, d := range in.Drifts {
		if d.Series < 0 || d.Series >= len(in.Series) || !finite(d.AtH) || !d.Prior.ok() {
			return fmt.Errorf("drift %s: no such gauge, or its time or prior is not a number", d.Name)
		}
	}
	for i := range in.Ambient {
		if err := in.Ambient[i].validate(len(in.Series)); err != nil {
			return fmt.Errorf("%s: %w", in.Ambient[i].Name, err)
		}
	}
	return nil
}

func (k *Knowledge) ok() bool { return k == nil || finite(k.Value) && finite(k.U) && k.U > 0 }

func (s *Series) validate() error {
	n := len(s.TimeH)
	if len(s.SagMM) != n || len(s.U) != n || s.N != nil && len(s.N) != n {
		return fmt.Errorf("%d times, %d sags, %d uncertainties", n, len(s.SagMM), len(s.U))
	}
	if s.ZeroU < 0 || !finite(s.ZeroU) {
		return fmt.Errorf("the uncertainty of its zero is %g", s.ZeroU)
	}
	for i := range n {
		if !finite(s.TimeH[i]) || !finite(s.SagMM[i]) {
			return fmt.Errorf("bin %d is not a number", i+1)
		}
		if !(s.U[i] > 0) || !finite(s.U[i]) {
			return fmt.Errorf("the uncertainty of bin %d is %g; it must be positive", i+1, s.U[i])
		}
		if i > 0 && s.TimeH[i] <= s.TimeH[i-1] {
			return fmt.Errorf("bin %d is not after the one before", i+1)
		}
	}
	if len(s.Changes) == 0 {
		return errors.New("no change of load")
	}
	if s.PartU < 0 || !finite(s.PartU) || s.Parts != nil && len(s.Parts) != len(s.Changes) {
		return fmt.Errorf("%d changes of load, split for %d, with relative uncertainty %g", len(s.Changes), len(s.Parts), s.PartU)
	}
	for _, parts := range s.Parts {
		if len(parts) == 0 || len(parts) != len(s.Parts[0]) || !allFinite(parts) {
			return errors.New("a change of load is not split into the same loads as the first, or by no number")
		}
	}
	for _, c := range s.Changes {
		if !finite(c.AtH) || !finite(c.RampH) || c.RampH < 0 || !finite(c.Newton) || c.U < 0 || !finite(c.U) {
			return errors.New("a change of load is not a number or has a negative ramp or uncertainty")
		}
	}
	return nil
}

func (a *Ambient) validate(series int) error {
	if len(a.TimeH) != len(a.Value) || len(a.TimeH) < 2 {
		return fmt.Errorf("%d times for %d values; two or more are needed", len(a.TimeH), len(a.Value))
	}
	for i := range a.TimeH {
		if !finite(a.TimeH[i]) || !finite(a.Value[i]) || i > 0 && a.TimeH[i] <= a.TimeH[i-1] {
			return fmt.Errorf("reading %d is not a number or not after the one before", i+1)
		}
	}
	for _, s := range a.Series {
		if s < 0 || s >= series {
			return fmt.Errorf("no gauge number %d", s)
		}
	}
	if !a.Prior.ok() || a.LagH[0] < 0 || a.LagH[1] < a.LagH[0] || !finite(a.LagH[1]) {
		return errors.New("the prior or the bounds of the lag are not usable")
	}
	return nil
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func allFinite(v []float64) bool {
	for _, x := range v {
		if !finite(x) {
			return false
		}
	}
	return true
}
