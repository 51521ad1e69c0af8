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
//   - decoding a text frame allocates nothing.
//
// It imports nothing else of gaugelog.
package frame
