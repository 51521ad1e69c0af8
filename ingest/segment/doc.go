// Package segment owns the files of a run folder in both directions: writing
// segments of line protocol, reading them back, recovering what a crash left,
// and checking them. FORMAT.md beside this file specifies every byte.
//
// It promises that everything before the last completed Sync is on disk and
// provably whole; that a damaged block is found and skipped, never guessed at;
// that a torn tail is left where it is and never parsed; that a file is never
// edited after an error; and that the reader gives the same records in the
// same order whatever the number of cores.
//
// It imports nothing else of gaugelog.
package segment
