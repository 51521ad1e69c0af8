// Package terminal shows a run in a terminal: the same answers as the live page,
// from a run folder or from the page of a recording elsewhere.
//
// In a terminal it fills the screen, follows its size, and lists its keys at the
// bottom; elsewhere it prints one line when an answer changes, and seldom. It
// promises that colours are those IEC 60073 gives and never stand without their
// word, that NO_COLOR is respected, that whatever a gauge, a rig file or a
// server says cannot steer the terminal, that memory is bounded by one view of
// the run and one screen, and that nothing is asked for while nothing changes:
// the views are pushed to it.
package terminal
