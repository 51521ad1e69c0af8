package analysis

// Series is what the plots draw. Times are seconds from the first reading of
// the run; sags are mm, down positive, net of support movement and offsets.
type Series struct {
	Gauges  []GaugeSeries  `json:"gauges"`
	Ambient []ProbeSeries  `json:"ambient"`
	Curve   []ElasticCurve `json:"curve"`
	Law     []LawPoint     `json:"law"`
	// Creep are the points within the creep step that the law was fitted to.
	Creep []CreepPoint `json:"creep"`
	// CreepFullS is the instant of full load of the creep step and CreepEndS
	// its end, in the same seconds; both 0 where there is no creep step.
	CreepFullS float64 `json:"creep_full_s"`
	CreepEndS  float64 `json:"creep_end_s"`
}

// GaugeSeries is one gauge's sag, thinned to at most some hundred points.
type GaugeSeries struct {
	Gauge string    `json:"gauge"`
	Sees  string    `json:"sees"`
	AtMM  float64   `json:"at_mm"`
	TimeS []float64 `json:"time_s"`
	SagMM []float64 `json:"sag_mm"`
	// RawMM is the indication itself at the same times.
	RawMM []float64 `json:"raw_mm"`
}

// ProbeSeries is one probe's readings, thinned; NaN never occurs: a list is
// empty where the probe does not read that quantity.
type ProbeSeries struct {
	Probe           string    `json:"probe"`
	TimeS           []float64 `json:"time_s"`
	Celsius         []float64 `json:"celsius"`
	HumidityPercent []float64 `json:"humidity_percent"`
}

// ElasticCurve is the fitted shape of the beam in one step at the
// initial-sag time.
type ElasticCurve struct {
	Step  string    `json:"step"`
	AtMM  []float64 `json:"at_mm"`
	SagMM []float64 `json:"sag_mm"`
	// Points are the gauges' own sags with their u.
	PointAtMM []float64 `json:"point_at_mm"`
	PointMM   []float64 `json:"point_mm"`
	PointU    []float64 `json:"point_u"`
}

// LawPoint is the fitted law for the creep gauge with its 95 % band, seconds
// after full load of the creep step; Beyond marks what lies behind the data.
type LawPoint struct {
	AfterS float64 `json:"after_s"`
	SagMM  float64 `json:"sag_mm"`
	Lo95   float64 `json:"lo95"`
	Hi95   float64 `json:"hi95"`
	Beyond bool    `json:"beyond,omitempty"`
}

// CreepPoint is one bin of the creep gauge, seconds after full load of the
// creep step: its sag without what is neither load nor creep (surroundings,
// offsets, drift), and what the fit leaves over.
type CreepPoint struct {
	AfterS        float64 `json:"after_s"`
	CompensatedMM float64 `json:"compensated_mm"`
	ResidualMM    float64 `json:"residual_mm"`
}
