// Package calibrate turns a session with gauge blocks into a gauge's
// calibration line: indication = offset + gain * true, with the covariance of
// the two, the residuals, hysteresis, repeatability, and whether a line is
// enough.
//
// It promises that no figure stands on a made-up uncertainty: what a session
// cannot tell (hysteresis without a way down, repeatability without repeats)
// is absent and said in words; that a difference between two readings of one
// gauge does not carry the offset's uncertainty; and that no NaN leaves it.
//
// Lengths are in mm, temperatures in degrees Celsius.
package calibrate
