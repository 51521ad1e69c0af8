// Package fetch reads a run back from a time-series server and lays it out as a
// run folder, so that whatever works on a folder works on a server.
//
// Two interfaces are understood. InfluxQL over HTTP (/query) gives back numbers,
// words and stamps as they were sent, to the nanosecond. The JSON export of
// servers that keep numbers only (/api/v1/export) gives back whole milliseconds
// and no words: loads, readings and the kinds of events come back, the names of
// steps, notes, and what was withdrawn do not.
//
// What that costs, measured on the demo's run by TestSurviveFromServers
// (go test -tags campaign -run SurviveFromServers ./cmd/gaugelog): by InfluxQL
// every figure of the analysis is the folder's; from whole milliseconds every
// quantity lies within a fiftieth of its standard uncertainty, a gauge's own drift
// within a twentieth (the forecasts of
// single laws and the lines of the budget left out: laws that fit poorly moved
// by 0.2 to 0.9 of theirs). The boot ids of
// the recording are no points, so that of a gap is said that the recording broke
// off, and not that the machine was started anew.
//
// It promises: every point of the run is in the folder once, in order of time;
// what the server does not hold is said in Summary.Lost; a run in which
// something was withdrawn or done to a gauge is refused where the server cannot
// say what; memory is bounded by one piece of an answer or one window of time;
// after an error nothing is left behind. The rig file and the amendments are no
// points and are given.
package fetch
