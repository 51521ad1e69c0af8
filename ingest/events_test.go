package ingest

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"syscall"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/segment/segmenttest"
)

// TestAFaultOfTheEventsFileHoldsNoReadingBack: while events.lp takes nothing the
// readings go on being synced, and the events wait for it.
func TestAFaultOfTheEventsFileHoldsNoReadingBack(t *testing.T) {
	for _, fault := range []segmenttest.Failure{
		{Only: []string{"write"}, Err: syscall.ENOSPC},
		{Only: []string{"sync"}, Err: syscall.EIO},
		{Only: []string{"append"}, Err: syscall.EROFS},
	} {
		t.Run(fmt.Sprint(fault.Only, fault.Err), func(t *testing.T) {
			mem := segmenttest.New()
			rig := testRig(1, config.Sampling{All: true})
			rig.Record.Roll.Age = *duration(100) // segments go on being rolled
			r := mustOpen(t, testOptions(mem, rig))
			fault.At, fault.Persistent, fault.Name = 1, true, eventsName
			mem.Inject(&fault)
			at, told := testStart, 0
			read := func(n int) {
				for range n {
					at = later(at, time.Second)
					must(t, r.Handle(Seen(indication("g0", 1, at))))
				}
			}
			for range 20 {
				told++
				must(t, r.Handle(Event{Kind: Happened, At: at, What: Happening{Kind: AlarmRaised, Detail: fmt.Sprint(told)}}))
				read(31)
			}
			cut := mem.Crash(rand.New(rand.NewPCG(1, 1)), false)
			if n := len(stored(t, cut)["g0"]); n < 20*31-10 {
				t.Errorf("%d readings of %d are on disk although only events.lp fails", n, 20*31)
			}
			if r.held > 10 || r.lost > 0 || r.eventsError == nil {
				t.Errorf("%d readings wait, %d are lost, the fault is %v", r.held, r.lost, r.eventsError)
			}
			if calls := mem.Calls(); calls > 15 {
				t.Errorf("%d attempts on events.lp in ten minutes: each may leave a torn piece", calls)
			}
			mem.Inject(nil)
			read(1300) // the pause between two attempts has grown to ten minutes
			must(t, r.Close(at))
			e := events(t, mem)
			for i, n := 0, 0; i < len(e); i++ {
				if text, ok := strings.CutPrefix(e[i], AlarmRaised+": "); ok {
					if n++; text != fmt.Sprint(n) {
						t.Fatalf("event %d says %q", n, text)
					}
					told--
				}
			}
			if told != 0 || !has(e, "disk-full: events.lp: the disk") || !has(e, "disk-back: events.lp takes events again") {
				t.Errorf("%d events are missing; %q", told, e)
			}
			if n := len(stored(t, mem)["g0"]); n != 20*31+1300 {
				t.Errorf("%d readings of %d", n, 20*31+1300)
			}
		})
	}
}

// TestEventsWithoutRoomAreCounted: memory for events is bounded, and what it
// does not hold is told.
func TestEventsWithoutRoomAreCounted(t *testing.T) {
	mem := segmenttest.New()
	r := mustOpen(t, testOptions(mem, testRig(1, config.Sampling{All: true})))
	mem.Inject(&segmenttest.Failure{At: 1, Persistent: true, Name: eventsName, Err: syscall.EIO})
	at := testStart
	const sent = 3 * mostEvents
	for i := range sent {
		at = later(at, 100*time.Millisecond)
		must(t, r.Handle(Event{Kind: Happened, At: at, What: Happening{Kind: AlarmRaised, N: 1, Detail: fmt.Sprint(i)}}))
		must(t, r.Handle(Seen(indication("g0", 1, at))))
	}
	if n := r.store.queued.held + len(r.filling.events); n > 2*mostEvents {
		t.Errorf("%d events in memory, the bound is %d for those waiting and for those of the next sync", n, mostEvents)
	}
	mem.Inject(nil)
	for range 1300 {
		at = later(at, time.Second)
		must(t, r.Handle(TickAt(at)))
	}
	must(t, r.Close(at))
	there, lost := 0, int64(0)
	folder, err := segment.OpenFolder(mem)
	must(t, err)
	records, _, err := folder.Log(eventsName)
	must(t, err)
	others := 0
	for _, rec := range records {
		n, _ := rec.Point.Value("n")
		switch rec.Name {
		case AlarmRaised:
			there++
		case Dropped:
			lost += n.(int64)
		default:
			others++
		}
	}
	// The event that tells of the fault may itself be among those lost.
	if all := int64(there) + lost; lost == 0 || all < sent || all > sent+2 {
		t.Errorf("%d events stored and %d told as dropped, %d were sent", there, lost, sent)
	}
	if n := len(stored(t, mem)["g0"]); n != sent {
		t.Errorf("%d readings of %d", n, sent)
	}
}

// TestEventsThatCannotBeSavedAreToldAtTheEnd: the readings are all there, and
// Close says how many events are not.
func TestEventsThatCannotBeSavedAreToldAtTheEnd(t *testing.T) {
	mem := segmenttest.New()
	r := mustOpen(t, testOptions(mem, testRig(1, config.Sampling{All: true})))
	mem.Inject(&segmenttest.Failure{At: 1, Persistent: true, Name: eventsName, Only: []string{"write"}, Err: syscall.EIO})
	at := testStart
	for range 60 {
		at = later(at, time.Second)
		must(t, r.Handle(Seen(indication("g0", 1, at))))
	}
	err := r.Close(at)
	if err == nil || !strings.Contains(err.Error(), "events could not be saved: the disk reports an input/output error") || strings.Contains(err.Error(), "readings could not") {
		t.Errorf("Close says %v", err)
	}
	mem.Inject(nil)
	if n := len(stored(t, mem)["g0"]); n != 60 {
		t.Errorf("%d readings of 60", n)
	}
}
