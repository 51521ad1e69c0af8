//go:build !linux && !darwin && !windows

package ingest

import "errors"

func diskFree(string) (int64, error) {
	return 0, errors.New("the free space of a disk is not known on this system")
}
