// Package glance says how a run stands without analysing it: the last reading,
// the sag and its rate from a few windows of readings, the alarms that are
// raised and the time left in the plan.
//
// It reads the first segment, the last two and the logs, whatever the length of
// the run. What it says of sag is corrected for the gauge's sense and
// calibration only, not for support movement, offsets or temperature, and is
// called apparent; corrected figures come from the analysis. A figure that the
// run cannot give is nil.
package glance
