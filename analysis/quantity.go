package analysis

// Q is a quantity of the result: a value, its standard uncertainty and unit.
type Q struct {
	Value float64 `json:"value"`
	// U is the standard uncertainty; nil where unknown, never 0.
	U    *float64 `json:"u"`
	Unit string   `json:"unit"`
	// DOF, K and U95 are the effective degrees of freedom, the coverage factor
	// and the expanded uncertainty for 95 %, where they were worked out.
	DOF *float64 `json:"dof,omitempty"`
	K   *float64 `json:"k,omitempty"`
	U95 *float64 `json:"U95,omitempty"`
}
