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
// The same rig, truth, faults and seed give the same bytes and instants. Memory
// is bounded by the number of load changes and by what one call of
// [Sim.Next] hands over, not by the length of the test.
//
// It handles beams on two pinned supports and cantilevers; a beam on three or
// more supports is refused with an error that says so.
package simulators
