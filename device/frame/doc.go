// Package frame finds frames in bytes: it turns what a gauge sends, described
// by [Options], into values or typed rejections.
//
// It is pure. It knows no port, no clock and no rig file; bytes go in through
// [Decoder.Feed], each frame comes out once, with the offset of its first
// byte. It promises that
//
//   - the result does not depend on how the bytes are split over calls;
//   - a frame counts only if it was matched whole: nothing is repaired,
//     skipped over or guessed, and what does not match is a rejection with a
//     [Reason];
//   - a decimal that was sent is kept as sent, digit for digit ([Decimal]),
//     and converted to millimetres exactly, rounding once;
//   - memory is bounded by the longest frame, whatever arrives;
//   - decoding a frame of any kind allocates nothing.
//
// A text frame (and a SCPI answer, and hex characters with a terminator) ends
// by its terminator. The other kinds are found by their length: a frame of
// which a crc16 holds counts at once; one with a weaker sum or none counts
// when the next one's sync or an idle gap ([Decoder.Quiet]) stands behind it;
// where there is no sync either, only between gaps, or, with a sum, in front
// of another whole frame.
//
// FRAMES.md beside this file says, for whoever has only an instrument's
// manual, how each key of a description is meant, with a worked example of
// each kind and the share of line faults that each guard lets through. It
// imports nothing else of gaugelog.
package frame
