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
// How each key of a [config.Frame] is read stands in frame/FRAMES.md; what
// the keys leave open is settled so:
//
//   - a modbus question reads from the lower of register and status up to the
//     higher, in one go; the address is the frame's, else the gauge's channel;
//   - a scpi query is closed by end, a line feed where that is empty; identity
//     is asked with *IDN? once an opening, before the first query, and is
//     found anywhere in the answer;
//   - a scale is taken digit for digit as the rig file shows it;
//   - a checksum's form is hex for text and hex-coded nibbles, else binary; it
//     stands behind the nibbles where no at says otherwise;
//   - over-range, under-range and error, as a status, make a non-reading; of
//     several flags set, the gravest is carried.
//
// It imports config, and nothing of ingest or analysis.
package device
