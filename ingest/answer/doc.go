// Package answer says in plain words what there is to see of a run at one
// moment: first the five questions that people ask at a rig (alive? knocked
// overnight? travel left? since yesterday? speeding up?), each with its figure,
// then what hangs, the gauges, the forecast, the room, the alarms and the
// recording itself, and the plots as points.
//
// The live page and the terminal view both render what it says, so that they
// never differ. It promises that a View is a pure function of a desk's snapshot
// and its rig, that nothing in it is a number that is none, that every tone has
// a word, and that what is not corrected is called so. Texts of gauges and rig
// files stand in it as they came: whoever renders them escapes them.
package answer
