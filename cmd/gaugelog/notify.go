package main

import (
	"sync"
	"time"

	"github.com/coreos/go-systemd/v22/daemon"

	"gaugelog/ingest"
)

// Limits of what still counts as progress.
const (
	// loopStands is how old a recorder's look at itself may be: it is renewed
	// several times a second while the recording turns over.
	loopStands = 15 * time.Second
	// syncStands is how long a sync may take before it counts as stuck rather
	// than slow: many times the worst stalls of memory cards.
	syncStands = 5 * time.Minute
)

// tellSystem tells the service manager, where there is one, that the recording
// runs, and feeds its watchdog as long as every recorder makes progress. The
// function returned ends that and says that the recording is ending.
func tellSystem(recs []*ingest.Recorder) (stop func()) {
	_, _ = daemon.SdNotify(false, daemon.SdNotifyReady) // without a manager this does nothing
	quit := make(chan struct{})
	var done sync.WaitGroup
	if every, err := daemon.SdWatchdogEnabled(false); err == nil && every > 0 {
		done.Go(func() { feed(recs, every/3, quit) })
	}
	return func() {
		_, _ = daemon.SdNotify(false, daemon.SdNotifyStopping)
		close(quit)
		done.Wait()
	}
}

// feed pings the watchdog while there is progress.
func feed(recs []*ingest.Recorder, every time.Duration, quit <-chan struct{}) {
	t := time.NewTicker(every)
	defer t.Stop()
	for {
		select {
		case <-quit:
			return
		case <-t.C:
			now, alive := ingest.SystemClock{}.Now().Boot, true
			for _, r := range recs {
				alive = alive && progresses(r.Status(), now)
			}
			if alive {
				_, _ = daemon.SdNotify(false, daemon.SdNotifyWatchdog)
			}
		}
	}
}

// progresses tells whether a recorder turns over and its disk answers. A disk
// that answers with an error is progress: the recorder deals with it.
func progresses(s *ingest.Status, bootNow int64) bool {
	if s == nil {
		return false
	}
	if s.Closed {
		return true
	}
	if time.Duration(bootNow-s.At.Boot) > loopStands {
		return false
	}
	return s.Waiting == 0 || s.Fault != "" || s.SyncAge < syncStands
}
