package analysis

// Schema is the name of the result's layout; schema.json describes it.
const Schema = "gaugelog.result/1"

// Result is everything the analysis says of a run, and the one thing from
// which JSON, terminal text and report are rendered. Times are RFC 3339 UTC
// with nanoseconds; lists are never nil; a pointer is nil where this run
// cannot measure the figure, and a warning then says why.
type Result struct {
	Schema       string        `json:"schema"`
	Run          Run           `json:"run"`
	Steps        []Step        `json:"steps"`
	Stiffness    Stiffness     `json:"stiffness"`
	Creep        Creep         `json:"creep"`
	Drift        Drift         `json:"drift"`
	Supports     []Support     `json:"supports"`
	Disturbances []Disturbance `json:"disturbances"`
	Decisions    []Decision    `json:"decisions"`
	Evaluations  []Evaluation  `json:"evaluations"`
	Warnings     []Warning     `json:"warnings"`
	// Series is what the plots draw: thinned readings and fitted curves.
	Series Series `json:"series"`
}

// Run names the run.
type Run struct {
	Title      string `json:"title"`
	Readings   int64  `json:"readings"` // indications only
	First      string `json:"first"`
	Last       string `json:"last"`
	RigSHA256  string `json:"rig_sha256"`
	Amendments int    `json:"amendments"`
	Gravity    Q      `json:"gravity"` // m/s2
	Program    string `json:"program"`
	// Blocks left out because they did not verify, and readings quarantined.
	DamagedBlocks int `json:"damaged_blocks"`
}

// Step is an interval between load changes; the first is the zero step.
type Step struct {
	Step  string             `json:"step"`
	From  string             `json:"from"`
	To    string             `json:"to"`
	Loads map[string]float64 `json:"loads"` // N, total on the beam by load
	// Kilogram holds the masses behind the loads where masses were given.
	Kilogram map[string]float64 `json:"kilogram,omitempty"`
	Response *bool              `json:"response"` // nil: the zero step
	Start    Start              `json:"start"`
	Gauges   []StepGauge        `json:"gauges"`
	Largest  *Largest           `json:"largest,omitempty"`
}

// Start says when a step began: as marked, as found (first movement) and at
// full load.
type Start struct {
	Marked  *string  `json:"marked,omitempty"`
	Found   *string  `json:"found,omitempty"`
	Full    *string  `json:"full,omitempty"`
	OffsetS *float64 `json:"offset_s,omitempty"` // marked - found
	US      *float64 `json:"u_s,omitempty"`
}

// StepGauge is one gauge's sag in one step (mm).
type StepGauge struct {
	Gauge     string  `json:"gauge"`
	AtMM      float64 `json:"at_mm"`
	Initial   *Q      `json:"initial,omitempty"`
	Increment *Q      `json:"increment,omitempty"`
	Final     *Q      `json:"final,omitempty"`
	SagAt     []SagAt `json:"sag_at"`
}

// SagAt is the sag a time after full load.
type SagAt struct {
	AfterS float64 `json:"after_s"`
	Sag    Q       `json:"sag"`
}

// Largest is the greatest sag along the beam and where it is.
type Largest struct {
	At  Q `json:"at"`
	Sag Q `json:"sag"`
}

// Creep is how the sag grows under steady load, from the creep step.
type Creep struct {
	Gauge         string       `json:"gauge,omitempty"`
	Step          string       `json:"step,omitempty"`
	Model         string       `json:"model,omitempty"`
	Parameters    map[string]Q `json:"parameters"`
	Candidates    []Candidate  `json:"candidates"`
	After         []After      `json:"after"`
	Equivalent    []Equivalent `json:"equivalent"`
	Rate          *Q           `json:"rate,omitempty"` // mm/d
	Method        string       `json:"method,omitempty"`
	Stage         string       `json:"stage,omitempty"`
	Acceleration  Acceleration `json:"acceleration"`
	Recovery      []Recovery   `json:"recovery"`
	PermanentSet  *Q           `json:"permanent_set,omitempty"`
	Forecast      []Forecast   `json:"forecast"`
	MayStop       []MayStop    `json:"may_stop"`
	InitialAfterS float64      `json:"initial_after_s"`
	Fit           *CreepFit    `json:"fit,omitempty"`
}

// CreepFit says how well the law holds the history.
type CreepFit struct {
	RMSmm      float64 `json:"rms_mm"`
	N          int     `json:"n"`
	NEffective float64 `json:"n_effective"`
	Lag1       float64 `json:"lag1"`
	AtBound    bool    `json:"at_bound"`
}

// Candidate is one law that was tried.
type Candidate struct {
	Model  string  `json:"model"`
	AICc   float64 `json:"aicc"`
	Weight float64 `json:"weight"`
}

// After is the creep gauge's sag a time after full load of the creep step.
type After struct {
	AfterS      float64 `json:"after_s"`
	Sag         Q       `json:"sag"`
	Relative    *Q      `json:"relative,omitempty"`
	Coefficient *Q      `json:"coefficient,omitempty"`
	Modelled    bool    `json:"modelled,omitempty"`
}

// Equivalent is the single-load equivalent J(t)/J(initial).
type Equivalent struct {
	AfterS   float64 `json:"after_s"`
	Relative Q       `json:"relative"`
}

// Acceleration holds the warnings of failure, as instants.
type Acceleration struct {
	MinimumTime   *string `json:"minimum_time,omitempty"`
	CautionTime   *string `json:"caution_time,omitempty"`
	ClearAreaTime *string `json:"clear_area_time,omitempty"`
}

// Recovery is what came back a time after unloading.
type Recovery struct {
	AfterS    float64 `json:"after_s"`
	Recovered Q       `json:"recovered"` // share of the sag before unloading
	Residual  Q       `json:"residual"`  // mm
}

// Forecast is the sag at a time not yet reached.
type Forecast struct {
	After   string    `json:"after"`
	AfterS  float64   `json:"after_s"`
	Sag     *Q        `json:"sag,omitempty"`
	Lo95    *float64  `json:"lo95,omitempty"`
	Hi95    *float64  `json:"hi95,omitempty"`
	Decades float64   `json:"decades"`
	Label   string    `json:"label"` // plain | caution | informative | refused
	ByModel []ByModel `json:"by_model"`
	Refused string    `json:"refused,omitempty"`
}

// ByModel is one law's forecast, mm.
type ByModel struct {
	Model string `json:"model"`
	Sag   Q      `json:"sag"`
}

// MayStop is what more time would buy: the width of the 95 % interval of the
// forecast for ForecastAfterS, MoreS later than the creep step's last reading
// under its load (after an unloading: had the load stayed). A negative MoreS
// looks back: so wide it was at that time.
type MayStop struct {
	MoreS          float64 `json:"more_s"`
	ForecastAfterS float64 `json:"forecast_after_s"`
	ForecastWidth  Q       `json:"forecast_width"`
}

// Drift is what moved that was neither load nor creep.
type Drift struct {
	Gauges      []GaugeDrift  `json:"gauges"`
	Temperature []AmbientTerm `json:"temperature"`
	Humidity    []AmbientTerm `json:"humidity"`
	// Soak says how the gauges wandered at rest before the first load; empty
	// where they were not read for five minutes at one interval.
	Soak []Soak `json:"soak"`
}

// Soak is how one gauge wandered at rest.
type Soak struct {
	Gauge     string  `json:"gauge"`
	From      string  `json:"from"`
	To        string  `json:"to"`
	Readings  int     `json:"readings"`
	IntervalS float64 `json:"interval_s"`
	// AverageS is the averaging time of least Allan deviation: averaging longer
	// takes drift in.
	AverageS float64 `json:"average_s"`
	// Floor is the resolution over the square root of 12; Floored says that
	// constant readings have it in place of a deviation of 0.
	Floor     Q               `json:"floor"`
	Floored   bool            `json:"floored"`
	Deviation []SoakDeviation `json:"deviation"`
	Rate      *Q              `json:"rate,omitempty"` // straight drift, mm/d
}

// SoakDeviation is the overlapping Allan deviation at one averaging time.
type SoakDeviation struct {
	AverageS  float64 `json:"average_s"`
	Deviation Q       `json:"deviation"`
}

// GaugeDrift is a gauge's own rate, mm/d.
type GaugeDrift struct {
	Gauge string `json:"gauge"`
	Rate  Q      `json:"rate"`
}

// AmbientTerm is a gauge's answer to temperature (mm/K) or humidity (mm per %).
type AmbientTerm struct {
	Gauge       string `json:"gauge"`
	Coefficient Q      `json:"coefficient"`
	// LagH is absent where the search for it ran to its bound.
	LagH *Q `json:"lag_h,omitempty"`
}

// Support is how far a support went down.
type Support struct {
	Name       string `json:"name"`
	Settlement *Q     `json:"settlement,omitempty"`
	Measured   bool   `json:"measured"`
}

// Disturbance is something that moved a gauge and was neither planned load
// nor creep.
type Disturbance struct {
	Kind    string   `json:"kind"`
	Gauges  []string `json:"gauges"`
	From    string   `json:"from"`
	To      *string  `json:"to,omitempty"`
	Size    *Q       `json:"size,omitempty"` // mm
	Load    *Q       `json:"load,omitempty"` // N
	Treated string   `json:"treated"`
	// Candidates are the kinds an "undecided" one may be.
	Candidates []string `json:"candidates,omitempty"`
	Evidence   string   `json:"evidence,omitempty"`
}

// Decision is what a person overruled.
type Decision struct {
	Path  string `json:"path"`
	Value string `json:"value"`
	Why   string `json:"why"`
	By    string `json:"by"`
	Since string `json:"since,omitempty"`
}

// Evaluation is one clause of one rule, held against the run.
type Evaluation struct {
	Rule     string `json:"rule"`
	Clause   string `json:"clause"`
	Pass     *bool  `json:"pass"`
	Measured *Q     `json:"measured"`
	Required string `json:"required"`
	Why      string `json:"why"`
}

// Warning is something a reader must know; scripts read Code.
type Warning struct {
	Code  string `json:"code"`
	Gauge string `json:"gauge,omitempty"`
	Time  string `json:"time,omitempty"`
	Text  string `json:"text"`
}
