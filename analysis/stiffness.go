package analysis

// Stiffness is what the loading part says of the beam.
type Stiffness struct {
	Modulus                 *Q                 `json:"modulus,omitempty"`
	ApparentModulus         *Q                 `json:"apparent_modulus,omitempty"`
	ShearModulus            *Q                 `json:"shear_modulus,omitempty"`
	Bending                 *Q                 `json:"bending,omitempty"`
	Shear                   *Q                 `json:"shear,omitempty"`
	ShearFrom               string             `json:"shear_from,omitempty"` // "test" | "prior" | "none"
	ShearText               string             `json:"shear_text,omitempty"` // how it came about
	Supports                []SupportStiffness `json:"supports"`
	CorrelationBendingShear *float64           `json:"correlation_bending_shear,omitempty"`
	StiffnessAt             []StiffnessAt      `json:"stiffness_at"`
	Standards               []StandardModulus  `json:"standards"`
	Fit                     *Fit               `json:"fit,omitempty"`
	Budget                  []BudgetLine       `json:"budget"`         // the modulus's
	BendingBudget           []BudgetLine       `json:"bending_budget"` // the bending stiffness's
	InitialAfterS           float64            `json:"initial_after_s"`
	Residuals               []Residual         `json:"residuals"`
	MonteCarlo              *MonteCarlo        `json:"monte_carlo,omitempty"`
}

// SupportStiffness is one support's yielding.
type SupportStiffness struct {
	Name       string `json:"name"`
	Compliance *Q     `json:"compliance,omitempty"` // mm/N
}

// StiffnessAt is load over sag at one gauge.
type StiffnessAt struct {
	Gauge         string `json:"gauge"`
	Ratio         *Q     `json:"ratio,omitempty"` // N per mm
	LocalModulus  *Q     `json:"local_modulus,omitempty"`
	GlobalModulus *Q     `json:"global_modulus,omitempty"`
}

// Fit says how well the model holds the readings.
type Fit struct {
	Chi2 float64 `json:"chi2"`
	DOF  int     `json:"dof"`
	P    float64 `json:"p"`
	// Birge is the factor by which uncertainties were widened; 1 if none.
	Birge float64 `json:"birge"`
	// Condition is the condition number of the scaled design.
	Condition float64 `json:"condition"`
	// Unknowns are the fit's, Correlation theirs, row by row.
	Unknowns    []string    `json:"unknowns"`
	Correlation [][]float64 `json:"correlation"`
}

// StandardModulus is a modulus by a standard's own formula; Includes says what
// the figure contains.
type StandardModulus struct {
	Standard string `json:"standard"`
	Gauge    string `json:"gauge"`
	Includes string `json:"includes"`
	Modulus  Q      `json:"modulus"`
}

// BudgetLine is one input of a figure's uncertainty.
type BudgetLine struct {
	Input        string   `json:"input"`
	Type         string   `json:"type"`         // "A" | "B"
	Distribution string   `json:"distribution"` // "normal" | "rectangular" | "t"
	UInput       Q        `json:"u_input"`
	DOF          *float64 `json:"dof,omitempty"` // nil: many
	Sensitivity  float64  `json:"sensitivity"`   // change of the figure per unit of the input
	Share        float64  `json:"share"`         // of the figure's variance, 0..1
	Source       string   `json:"source"`
}

// Residual is reading minus model for one gauge and step, mm.
type Residual struct {
	Gauge string  `json:"gauge"`
	Step  string  `json:"step"`
	MM    float64 `json:"mm"`
	U     float64 `json:"u"`
}
