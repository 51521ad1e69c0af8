// Package desk keeps what there is to know of one run at present: the last
// readings, rolled-up bins, the loads and marks, what the analysis says, and
// the alarms. The live page, the metrics and the alarms' messages all speak
// from its Snapshot.
//
// The analysis itself is plugged in from outside as a function, for ingest
// does not import it; it runs beside the recording, at most once a minute and
// for at most a tenth of the time.
//
// The package promises: nothing that reads or records ever waits for it (Take
// drops what does not fit, and counts it); a Snapshot is never changed once it
// is out; after a restart the bins come from the summaries of closed segments and
// from what was recorded since, not from reading everything (see package past). What it says of sag
// is not corrected for anything but the sense of the gauge, and is called so;
// corrected figures come from the analysis alone.
package desk
