// Package ingest records a run: it takes readings, marks and what happened to
// the ports, decides which readings are kept, and puts them into the run
// folder through package ingest/segment.
//
// The parts, from the inside out:
//
//   - [Recorder] records one run. It has no timer and starts no goroutine
//     unless it is asked to be live: it handles [Event] values, each with its
//     instant, and compares that instant with the instants at which something
//     is due (a sync, a roll, a kept reading, a silence). The same events give
//     the same folder, byte for byte.
//   - [Runner] is the real-time side: a [gaugelog/device.Sink] that never
//     blocks, a ticker and a watcher of the marks file in front of one
//     recorder or several.
//   - [AppendMark] is what the mark command does, in a process of its own.
//
// The package promises: after a crash or a power cut everything older than the
// last completed sync is on disk and provably whole, and [Status] tells how
// old that is; a mark is on disk before AppendMark returns; reading never
// waits for the disk; every queue and buffer is bounded, and what had to be
// dropped is counted and recorded as an event of kind dropped; a file is never
// written to again after an error on it; what is kept is always a real
// reading, never an average.
//
// It imports config, device and ingest/segment, and nothing of analysis.
package ingest
