package evaluate

import "math"

// Quantity is a measured or stated figure in internal units (mm, N, MPa, s,
// degree Celsius, plain numbers; percentages as fractions).
type Quantity struct {
	Value float64
	// U is the standard uncertainty in the same unit; 0 where it is unknown,
	// unless Exact.
	U float64
	// Exact marks a count or a stated limit, which has no uncertainty.
	Exact bool
}

// Exactly is an exact Quantity.
func Exactly(v float64) *Quantity { return &Quantity{Value: v, Exact: true} }

// Measured is a Quantity with its standard uncertainty, 0 where unknown.
func Measured(v, u float64) *Quantity { return &Quantity{Value: v, U: u} }

// Reading is a figure a time after full load (or after unloading).
type Reading struct {
	AfterS float64
	Quantity
	// Modelled is true where no reading was near and a law stands in: a rule
	// does not take it for a reading.
	Modelled bool
}

// Facts is what a run offers to the rules. A nil pointer or an empty list is
// what this run cannot tell. The creep step is the longest loaded step, the
// creep gauge the one its figures are of; sags are net of support movement,
// from the baseline, and total (those of earlier steps included).
type Facts struct {
	// Geometry, mm (mm4, mm3). Span is between the supports on either side of
	// the creep gauge; the section's sizes are means.
	Span, Width, Depth            *Quantity
	SecondMoment, SectionModulus  *Quantity
	Supports, SupportsMeasured    *Quantity // counts
	GaugeOffCentre, LoadOffCentre *Quantity // mm from mid-span
	Gauges                        *Quantity // how many see the beam
	Resolution                    *Quantity // of the creep gauge, mm
	// Load of the creep step above the baseline, N; at how many places it
	// acts; how many loaded steps there were up to and with the creep step;
	// how long its placing took, s.
	Load, LoadPlaces, LoadSteps, LoadRamp *Quantity
	// Stress is the greatest bending stress of Load, Strength what the rig
	// file expects, MPa.
	Stress, Strength *Quantity
	// Duration of the creep step from full load and of the recovery, s.
	Duration, RecoveryDuration *Quantity
	// Surroundings in the creep step: degree Celsius, humidity as a fraction.
	TemperatureMin, TemperatureMax, HumidityMin, HumidityMax *Quantity
	// InitialSag is the creep gauge's at the rig's initial_after, InitialAfter
	// that time (s); EndSag that at the end of the creep step; GreatestSag the
	// greatest along the beam at initial_after. mm.
	InitialSag, InitialAfter, EndSag, GreatestSag *Quantity
	// ForecastSag is the farthest forecast that was not refused (mm) and
	// ForecastAfter its time after full load (s).
	ForecastSag, ForecastAfter *Quantity
	// PermanentSet is the sag the law of the loading part does not explain.
	PermanentSet *Quantity
	// Limits of the rig file.
	LimitSag, LimitSpanOverSag *Quantity
	// Sag holds the creep gauge's sags, Recovered the share recovered.
	Sag, Recovered []Reading
	// ReadAt holds the times after full load (s) at which the creep gauge was
	// really read, as far as the rules ask for them.
	ReadAt []float64
	// Details are the rig file's, by name.
	Details map[string]string
}

// quantity is one name a formula may use.
type quantity struct {
	unit string // as documented; its dimension counts
	of   func(*Facts) *Quantity
	// missing says why a run may lack it, or how to mend it.
	missing string
}

// catalogue is every named quantity; RULES.md describes each, and a test
// holds the two together.
var catalogue = map[string]quantity{
	"span":              {"mm", func(f *Facts) *Quantity { return f.Span }, "the creep gauge does not stand between two supports"},
	"width":             {"mm", func(f *Facts) *Quantity { return f.Width }, "the section states no width"},
	"depth":             {"mm", func(f *Facts) *Quantity { return f.Depth }, "the section states no depth"},
	"second_moment":     {"mm4", func(f *Facts) *Quantity { return f.SecondMoment }, "the section's second moment is not known"},
	"section_modulus":   {"mm3", func(f *Facts) *Quantity { return f.SectionModulus }, "the section's depth is not known"},
	"supports":          {"1", func(f *Facts) *Quantity { return f.Supports }, "no supports are stated"},
	"supports_measured": {"1", func(f *Facts) *Quantity { return f.SupportsMeasured }, "no supports are stated"},
	"gauge_off_centre":  {"mm", func(f *Facts) *Quantity { return f.GaugeOffCentre }, "there is no creep gauge between two supports"},
	"load_off_centre":   {"mm", func(f *Facts) *Quantity { return f.LoadOffCentre }, "the load of the creep step is not one load at one place"},
	"gauges":            {"1", func(f *Facts) *Quantity { return f.Gauges }, "no gauge sees the beam"},
	"resolution":        {"mm", func(f *Facts) *Quantity { return f.Resolution }, "there is no creep gauge"},
	"load":              {"N", func(f *Facts) *Quantity { return f.Load }, "no loaded step was found"},
	"load_places":       {"1", func(f *Facts) *Quantity { return f.LoadPlaces }, "no loaded step was found"},
	"load_steps":        {"1", func(f *Facts) *Quantity { return f.LoadSteps }, "no loaded step was found"},
	"load_ramp":         {"s", func(f *Facts) *Quantity { return f.LoadRamp }, "the time the load took to be placed was not found"},
	"stress":            {"MPa", func(f *Facts) *Quantity { return f.Stress }, "the stress needs a loaded step and the section's depth"},
	"strength":          {"MPa", func(f *Facts) *Quantity { return f.Strength }, "the rig file states no expect.strength"},
	"duration":          {"s", func(f *Facts) *Quantity { return f.Duration }, "no loaded step was found"},
	"recovery_duration": {"s", func(f *Facts) *Quantity { return f.RecoveryDuration }, "the beam was not unloaded"},
	"temperature_min":   {"C", func(f *Facts) *Quantity { return f.TemperatureMin }, "no probe read the temperature all through the creep step"},
	"temperature_max":   {"C", func(f *Facts) *Quantity { return f.TemperatureMax }, "no probe read the temperature all through the creep step"},
	"humidity_min":      {"1", func(f *Facts) *Quantity { return f.HumidityMin }, "no probe read the humidity all through the creep step"},
	"humidity_max":      {"1", func(f *Facts) *Quantity { return f.HumidityMax }, "no probe read the humidity all through the creep step"},
	"initial_sag":       {"mm", func(f *Facts) *Quantity { return f.InitialSag }, "the initial sag was not read"},
	"initial_after":     {"s", func(f *Facts) *Quantity { return f.InitialAfter }, "the time of the initial sag is not known"},
	"end_sag":           {"mm", func(f *Facts) *Quantity { return f.EndSag }, "no sag was read at the end of the creep step"},
	"greatest_sag":      {"mm", func(f *Facts) *Quantity { return f.GreatestSag }, "the greatest sag along the beam was not found"},
	"forecast_sag":      {"mm", func(f *Facts) *Quantity { return f.ForecastSag }, "there is no forecast that was not refused"},
	"forecast_after":    {"s", func(f *Facts) *Quantity { return f.ForecastAfter }, "there is no forecast that was not refused"},
	"permanent_set":     {"mm", func(f *Facts) *Quantity { return f.PermanentSet }, "there was no unloading, or too little after it"},
	"limit_sag":         {"mm", func(f *Facts) *Quantity { return f.LimitSag }, "the rig file states no limits.sag"},
	"limit_span_over_sag": {"1", func(f *Facts) *Quantity { return f.LimitSpanOverSag },
		"the rig file states no limits.span_over_sag"},
	"kdef": {"1", kdefOf, catalogueKdefMissing},
}

// lookup is a function of time a formula may call.
type lookup struct {
	unit string
	of   func(*Facts) []Reading
	// ends is how long the state it reads from lasted.
	ends    func(*Facts) *Quantity
	lasting string
	missing string
}

var lookups = map[string]lookup{
	"sag": {"mm", func(f *Facts) []Reading { return f.Sag }, func(f *Facts) *Quantity { return f.Duration },
		"the creep step", "no sag was read"},
	"recovered": {"1", func(f *Facts) []Reading { return f.Recovered }, func(f *Facts) *Quantity { return f.RecoveryDuration },
		"the recovery", "no recovery was read"},
}

// finite returns q, or nil where it holds no usable number.
func finite(q *Quantity) *Quantity {
	if q == nil || math.IsNaN(q.Value) || math.IsInf(q.Value, 0) {
		return nil
	}
	if !(q.U >= 0) || math.IsInf(q.U, 0) {
		return &Quantity{Value: q.Value}
	}
	return q
}
