// Package live serves the page that people look at while a test runs: first on
// a phone, at the rig, for five seconds.
//
// The page is rendered here, from embedded templates; a small script of its own
// only puts newer sections in the place of older ones, as server-sent events
// bring them. Without scripts it reloads twice a minute. It needs nothing from
// the internet.
//
// The package promises: looking never changes anything (GET has no effect) and
// never makes a reading or the disk wait, for every view comes from a
// desk.Snapshot; whatever a gauge, a rig file or a visitor says is shown as
// text and never as markup; marks are entered only with the token, from the
// same origin, and after a confirmation; a foreign Host is refused; slow and
// idle clients are cut off, and their number is bounded well below the number
// of descriptors that the serial ports can share. A page opens in the time it
// takes to draw a few hundred bins, however long the run is.
package live
