// Package guess looks at what an instrument sent and proposes complete frame
// descriptions for the rig file, each with what it is sure of and what not.
//
// It is pure: captured bytes go in, proposals come out; it opens no port, asks
// nothing and knows no maker's gauge. It promises that a proposal was tried on
// the capture it was made from (text, nibbles and binary frames are read by it,
// the first values shown, and the share of the bytes they explain is told),
// that what the bytes cannot tell (a unit that was not sent, a minus that was
// not seen, the meaning of a letter) is said to be unsure and never passed off
// as known, and that the grammar proposed is as exact as the frames seen allow.
package guess
