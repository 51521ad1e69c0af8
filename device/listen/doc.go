// Package listen hears what is on a port before anybody knows what it is: it
// opens a port, keeps the bytes with their arrival times, and tries the usual
// line settings and requests until package guess can propose a frame.
//
// It promises that nothing is sent to an instrument before Say was told of it,
// that a port is let go of before the next setting is tried, and that an
// unplugged port ends the listening with what was heard until then.
package listen
