//go:build !linux

package device

import "time"

var processStart = time.Now()

// bootTime is the monotonic time since the program began: never stepped, but
// it may stand still while the machine sleeps, and starts anew with each process.
func bootTime() int64 { return int64(time.Since(processStart)) }
