// Package stiffness finds a beam's bending and shear stiffness and the
// yielding of its supports from the sags of all gauges in all steps, with the
// uncertainty that follows from every stated cause, and foretells what a rig
// and its plan can reach.
//
// The estimate is one weighted least-squares fit. An observation is an
// Increment: how much further a gauge's gross sag was, the initial-sag time
// after a change of load, than the trend before the change would have had it.
// Increments are free of the older steps' creep and of slow drift, and their
// sum over the steps says the same as cumulative sags would: both give the
// same estimate, because the covariance knows which plateau each pair of
// neighbouring increments shares. The model of an increment is
//
//	alpha B + gamma Q + sum over supports of c_s R_s N_s
//
// with alpha = 1/EI, gamma = 1/S, c the supports' compliances; B, Q, R, N are
// the beam package's. Gauges that see a seat read c_s R_s alone, gauges on a
// bar the difference to the bar's two feet. Plungers whose stiffness is known
// act as known loads -k times the reading. A beam with redundant supports is
// fitted by Gauss-Newton steps on the same lines.
//
// Every error that several readings share (a gauge's gain, a load's mass,
// gravity, each position, a plunger's stiffness, the section's dimensions,
// the assumed E/G) is a Cause: it moves all readings together through the
// model, so the covariance of the readings is J u2 J^T summed over the
// causes, beside each reading's own. The same list makes the budget and the
// Monte Carlo draws.
//
// Of 2000 tests simulated with the simulator's own mechanics, every error drawn
// at its stated size, the 95 % interval of the modulus held the truth in
// 95.8 %. FIGURES.md has that and the other figures with their commands.
//
// The shear's prior (an assumed E/G, or a stated shear modulus) is one of them,
// and the readings add what they know of the shear to it.
//
// What it does not do: it takes sags as small (a warning gives the factor beyond
// 1/50 of the span), supports as free of friction (a warning gives the bound),
// and a gauge that was not read in a step as not pushing in it. Loads and gauges
// off the beam's middle line are bounded in the budget, not corrected.
// Self-weight bends the beam before the baseline and so is in no increment; it
// counts in the stress that is foretold.
//
// It promises errors, never NaN, for tests that cannot tell; warnings in
// plain words for what the figures leave out; and the same bits for the same
// input. It reads nothing but what it is handed.
package stiffness
