// Package device turns bytes on serial ports into readings.
//
// It owns the ports: their stable identity, our own lock on each, one reading
// goroutine a port, polling, reconnecting for ever. It finds frames in the
// bytes (package device/frame), converts units exactly, and hands over
// [Reading] values, in the order of each port. It applies no calibration, no
// sense and no zero: an indication leaves it as the gauge showed it.
//
// It promises that a damaged frame is rejected and counted, never repaired;
// that partial frames around a lost port are dropped; that every port loss,
// return, refused frame and non-reading is itself handed over as a Reading;
// and that after Close every goroutine and descriptor it owned is gone.
//
// It imports config, and nothing of ingest or analysis.
package device
