package ingest

import (
	"os"
	"strings"
	"sync"
	"time"

	"golang.org/x/sys/unix"
)

var readBootID = sync.OnceValue(func() string {
	text, err := os.ReadFile("/proc/sys/kernel/random/boot_id")
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(text))
})

// From adjtimex(2): the clock is not kept by a source, and the state that says so.
const (
	staUnsync = 0x0040
	timeError = 5
)

func systemClockState() ClockState {
	s := ClockState{BootID: readBootID()}
	var t unix.Timex // modes 0: only read
	state, err := unix.Adjtimex(&t)
	if err != nil {
		// Some sandboxes forbid even the reading; then nothing is believed.
		return s
	}
	s.Synchronised = state != timeError && t.Status&staUnsync == 0
	s.MaxError = time.Duration(t.Maxerror) * time.Microsecond
	return s
}
