// Package forward sends a run folder to a line-protocol server over HTTP, while
// it is recorded or afterwards.
//
// It promises:
//
//   - every line of a whole, synced block is sent at least once, oldest first;
//     sending again does no harm, because a point is its series and its stamp;
//   - the cursor moves only after the server answered 204 for bytes that are
//     synced to disk; a torn or lost cursor means sending again, never skipping;
//   - a line that the server refuses is set aside with the server's words and
//     does not hold up the others; a server that refuses everything holds the
//     forwarding instead;
//   - readings of a boot whose clock was never set are held back, because a
//     corrected stamp would be a second point beside the wrong one;
//   - a token is sent and never shown;
//   - memory is bounded by one stretch of the folder, some megabytes.
//
// What a server said 204 to is taken to be kept. One that writes to disk some
// seconds later, such as VictoriaMetrics, loses these when it is killed, and
// nobody who forwards can know: sending again, without RUN/forward, makes it
// whole (TestSurviveForwardVictoria).
//
// Behind the first readings goes one point "rig brief=...", with what tells how
// the run stands of the rig file, for who looks at all rigs on the server.
//
// It only reads the run's files and keeps its own in RUN/forward, so that
// nothing it meets can reach the recording. Precision is always nanoseconds.
package forward
