// Package alarm decides when something at a rig is worth telling a person, and
// tells it.
//
// A Fact is what is seen of one cause at one subject (a gauge, or the run) at
// one moment: it asks for an alarm, lets it go, or is between the two
// thresholds and changes nothing. An Engine turns facts into alarms that are
// raised, seen and over; Messengers carry the messages out.
//
// It promises: no alarm flickers (a threshold to raise, another to end, and a
// time for which each must hold); at most one message of one cause at one
// subject in 24 hours, over restarts too; a danger is never held back by
// another cause; carrying a message out never makes the recording or the
// engine wait; and every message says that a software alarm is no safety
// device. Nothing in it reads a clock or starts a goroutine but Outbox.
package alarm
