//go:build !linux

package ingest

import (
	"crypto/rand"
	"encoding/hex"
	"sync"
)

// processBootID stands for a boot where the system names none: the boot-time
// clock starts anew with the process, so its instants compare within one only.
var processBootID = sync.OnceValue(func() string {
	var b [16]byte
	_, _ = rand.Read(b[:]) // never fails
	return hex.EncodeToString(b[:])
})

func systemClockState() ClockState { return ClockState{BootID: processBootID()} }
