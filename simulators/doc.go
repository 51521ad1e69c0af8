// Package simulators is a sag test that does not exist: the physics of a rig
// and the bytes its gauges would send, with a schedule of faults and a log of
// what really happened.
//
// It is there so that the whole of gaugelog can be tried and checked without
// hardware. It promises that its mathematics and its bytes are its own: sags
// come from the unit-load theorem by quadrature of moments and shears (package
// statics), creep from closed-form hereditary integrals (package creep), and
// frames from encoders written from the frame's description alone (package
// wire); nothing is shared with the analysis or with the device code, or the
// closed loop would check nothing. What it simulates comes from a file of its
// own, the truth, never from what the rig file expects.
//
// Gauges speak every kind of frame a rig file can describe: they stream, wait
// for a request, answer on a bus or behind a multiplexer as one of several, or
// send when their button is pressed (fault kind press, or [Sim.Press]). Faults
// come from a schedule ([Faults]). The log of the truth counts for every
// instrument the frames that were sent whole and readable, those of which a
// reader may or may not make something, and those that were harmed or lost
// ([Counts]); with [Options.Frames] it lists every one. A recording must hold
// all that are intact, and of the others nothing but what [Frame.MM] says.
//
// Several rigs on one computer, with ports in common, run as one [Joint];
// [Bench] is two such rigs with seven instruments, [DemoRig] one rig for a
// demonstration.
//
// The same rig, truth, faults and seed give the same bytes and instants. Memory
// is bounded by the number of load changes and by what one call of
// [Sim.Next] hands over, not by the length of the test.
//
// It handles beams on two pinned supports and cantilevers; a beam on three or
// more supports is refused with an error that says so.
package simulators
