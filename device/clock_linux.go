package device

import "golang.org/x/sys/unix"

// bootTime reads the clock that is never stepped and counts through suspend.
func bootTime() int64 {
	var ts unix.Timespec
	if err := unix.ClockGettime(unix.CLOCK_BOOTTIME, &ts); err != nil {
		panic("device: no boot-time clock: " + err.Error()) // Linux has it since 2.6.39
	}
	return ts.Nano()
}
