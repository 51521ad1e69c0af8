//go:build unix

package forward

import (
	"errors"
	"os"

	"gaugelog/ingest/segment"
)

// syncRead makes what was read durable: the recorder may have written a block
// and not yet synced it, and the cursor must not know more than the disk.
func syncRead(t *segment.Tape) error { return t.Sync() }

// syncDir makes renames and new files in dir durable.
func syncDir(root *os.Root, dir string) error {
	d, err := root.Open(dir)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}
