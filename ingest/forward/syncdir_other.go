//go:build !unix

package forward

import (
	"os"

	"gaugelog/ingest/segment"
)

// syncRead does nothing here: a file opened for reading cannot be synced on
// this system. A cursor that knows more than the disk is found out by the
// comment it should stand behind.
func syncRead(*segment.Tape) error { return nil }

// syncDir does nothing here: folders cannot be synced on this system, and a
// cursor that a power cut loses only means sending again.
func syncDir(*os.Root, string) error { return nil }
