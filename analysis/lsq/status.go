package lsq

// Status says how a search for nonlinear parameters ended.
type Status int

const (
	// Converged: no small step makes the fit better.
	Converged Status = iota
	// AtBound: converged, with at least one parameter on its bound; its own
	// uncertainty is then unknown and the others' hold with it fixed there.
	AtBound
	// Stalled: no step made the fit better, but the gradient is not small.
	Stalled
	// IterationLimit: the search was cut off; the figures are its best yet.
	IterationLimit
	// Unidentifiable: the best fit was found, but the observations do not fix
	// all its parameters; there is no covariance.
	Unidentifiable
)

// String returns the status in words.
func (s Status) String() string {
	switch s {
	case Converged:
		return "converged"
	case AtBound:
		return "a parameter is at its bound"
	case Stalled:
		return "stalled"
	case IterationLimit:
		return "iteration limit"
	case Unidentifiable:
		return "parameters cannot be told apart"
	}
	return "unknown status"
}
