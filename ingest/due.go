package ingest

import (
	"errors"
	"fmt"
	"syscall"
)

// due does what the present instant asks for: a retry after a fault, a sync, a
// look for silent gauges, a fresh Status.
func (r *Recorder) due() {
	if r.now >= r.nextGlance {
		r.nextGlance = r.now + glance
		r.watchSilence()
		r.tellSpells(false)
		r.watchDisk()
		if r.o.Live {
			r.publish()
		}
	}
	since := r.now - r.lastCommit
	switch {
	case r.failing:
		if r.now >= r.retryAt {
			r.send()
		}
	case !r.filling.empty() && since >= r.syncEvery(), since >= idleSync:
		if r.inFlight == nil {
			r.cut()
			r.send()
		}
	}
}

// syncEvery is the interval between syncs at present.
func (r *Recorder) syncEvery() int64 {
	every := int64(r.o.Rig.Record.Sync.Value * 1e9)
	if every <= 0 {
		every = usualSync
	}
	if r.now < r.fastUntil {
		return min(every, fastSync)
	}
	return every
}

// cut ends the batch that is being filled, under the clock as it is now.
func (r *Recorder) cut() {
	r.believe()
	r.endBatch()
}

func (r *Recorder) endBatch() {
	r.noteLosses()
	r.filling.clock = r.clockState()
	r.waiting = append(r.waiting, r.filling)
	if n := len(r.spare); n > 0 {
		r.filling, r.spare = r.spare[n-1], r.spare[:n-1]
		return
	}
	r.filling = &batch{}
}

// send hands the oldest waiting batch to the disk, unless one is on its way.
func (r *Recorder) send() {
	for len(r.waiting) > 0 && r.inFlight == nil {
		r.inFlight = r.waiting[0]
		r.sentAt = r.now
		r.lastCommit = r.now
		if r.writer != nil {
			r.writer.todo <- r.inFlight
			return
		}
		r.settle(r.store.try(r.inFlight))
		if r.failing {
			return
		}
	}
}

// collect takes what the writer's goroutine has finished.
func (r *Recorder) collect() {
	if r.writer == nil || r.inFlight == nil {
		return
	}
	select {
	case o := <-r.writer.done:
		r.settle(o)
		if !r.failing {
			r.send()
		}
	default:
	}
}

// outcome is how a commit ended.
type outcome struct {
	batch *batch
	err   error
	moved []string
	// refused counts values that line protocol cannot carry.
	refused int64
	// eventsErr is what keeps events in memory, nil where nothing does;
	// eventsLost counts those that memory had no room for.
	eventsErr  error
	eventsLost loss
}

// settle draws the consequences of a commit.
func (r *Recorder) settle(o outcome) {
	if o.batch == nil {
		return
	}
	r.inFlight = nil
	for _, text := range o.moved {
		r.happened(Happening{Kind: DiskBack, Detail: text})
	}
	if o.refused > 0 {
		r.happened(Happening{Kind: Dropped, N: o.refused, Detail: "readings dropped: line protocol cannot carry them"})
	}
	r.settleEvents(&o)
	if o.err != nil {
		r.fail(o.err)
		return
	}
	if r.failing {
		r.failing, r.retryPause, r.commitError = false, 0, nil
		r.happened(Happening{Kind: DiskBack, Detail: "the disk takes readings again"})
	} else if took := r.now - r.sentAt; r.slowTold {
		r.happened(Happening{Kind: DiskBack, Detail: "a sync ended after " + seconds(took)})
	}
	r.slowTold = false
	r.lastSynced = o.batch.clock.Boot
	r.held -= len(o.batch.entries)
	r.waiting = append(r.waiting[:0], r.waiting[1:]...)
	o.batch.reset()
	r.spare = append(r.spare, o.batch)
}

// settleEvents tells of a fault of events.lp, and of its end.
func (r *Recorder) settleEvents(o *outcome) {
	if o.eventsLost.n > 0 {
		if r.eventsLost.n == 0 {
			r.eventsLost.from = o.eventsLost.from
		}
		r.eventsLost.n += o.eventsLost.n
	}
	switch was := r.eventsError != nil; {
	case o.eventsErr != nil && !was:
		r.happened(Happening{Kind: DiskFull, Detail: eventsName + ": " + faultText(o.eventsErr) + "; events wait in memory, readings go on"})
	case o.eventsErr == nil && was:
		r.happened(Happening{Kind: DiskBack, Detail: eventsName + " takes events again"})
	}
	r.eventsError = o.eventsErr
}

// fail notes that the disk takes nothing. The batch stays first in line.
func (r *Recorder) fail(err error) {
	if !r.failing {
		r.failing = true
		r.happened(Happening{Kind: DiskFull, Detail: faultText(err)})
	}
	r.commitError = err
	r.retryPause = min(max(firstRetry, 2*r.retryPause), longestRetry)
	r.retryAt = r.now + r.retryPause
}

// faultText says what is wrong with the disk, without any path.
func faultText(err error) string {
	switch {
	case errors.Is(err, syscall.ENOSPC):
		return "the disk is full"
	case errors.Is(err, syscall.EROFS):
		return "the disk is read-only"
	case errors.Is(err, syscall.EIO):
		return "the disk reports an input/output error"
	}
	return "the disk takes nothing: " + err.Error()
}

// watchDisk notes a sync that takes too long, once.
func (r *Recorder) watchDisk() {
	if r.inFlight != nil && !r.slowTold && r.now-r.sentAt > slowAfter {
		r.slowTold = true
		r.happened(Happening{Kind: DiskSlow, Detail: "a sync has not ended within " + seconds(slowAfter)})
	}
}

// noteLosses records what had to be dropped, once there is room for it again.
func (r *Recorder) noteLosses() {
	if r.held >= r.o.mostWaiting() {
		return
	}
	for i := range r.dropped {
		l := &r.dropped[i]
		if l.n == 0 {
			continue
		}
		r.happened(Happening{Kind: Dropped, Gauge: r.channels[i].name, From: l.from, N: l.n,
			Detail: "readings dropped: the disk took nothing and memory was full"})
		*l = loss{}
	}
	if l := r.eventsLost; l.n > 0 && r.eventsError == nil && len(r.filling.events) < mostEvents {
		r.eventsLost = loss{}
		r.happened(Happening{Kind: Dropped, From: l.from, N: l.n, Detail: "events dropped: too many at once"})
	}
}

// lastTries is how often flushSync tries: memory holds the only copy, and there
// is no later. Each attempt writes to a file of its own.
const lastTries = 3

// flushSync puts everything on disk before it returns. A live recorder's
// writer must not be running.
func (r *Recorder) flushSync() error {
	r.writer = nil
	for range 2 {
		if !r.filling.empty() {
			r.cut()
		}
		for tries := 0; len(r.waiting) > 0; {
			b := r.waiting[0]
			r.inFlight, r.sentAt, r.lastCommit = b, r.now, r.now
			o := r.store.try(b)
			r.settle(o)
			if o.err == nil {
				tries = 0
				continue
			}
			if tries++; tries == lastTries {
				return fmt.Errorf("%s: %w", faultText(o.err), o.err)
			}
		}
	}
	return nil
}
