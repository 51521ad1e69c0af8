// Package past brings back, as bins, what a run recorded before: after a restart,
// and for whoever looks at a folder.
//
// It goes by segments. A closed one has a summary, a small file of its bins in
// report/live-bins/, which is made once, in the background, from what lies on
// disk; only segments without one are read: the open one, and those closed since.
// Of the others the readings are read only where bins do not do: the last twenty
// minutes, and the first hours since the origin.
//
// It promises that the bins are those that reading everything gives, but for
// rounding of sums and for the edges of bins since the origin, which lie up to
// five minutes off once they are hours wide; that a summary which is missing,
// torn, damaged, or of a segment that is not the same any more is made anew; that
// raw data is never touched and nothing but report/live-bins/ is written; and
// that memory does not grow with the run. A summary can always be made again, so
// whoever clears report/ costs the next start one pass over the readings.
package past
