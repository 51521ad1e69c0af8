//go:build !linux

package segment

import (
	"os"
	"runtime"
)

// dataSync makes a file durable by the system's full sync.
func dataSync(f *os.File) error { return f.Sync() }

// syncFolder makes a folder's entries durable. Windows cannot sync a folder
// opened for reading; its file system journals entries by itself.
func syncFolder(f *os.File) error {
	if runtime.GOOS == "windows" {
		return nil
	}
	return f.Sync()
}
