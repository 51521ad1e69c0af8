package onlook

import (
	"math"
	"slices"
	"time"

	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/segment"
)

// quietFor is how long nothing may be written before the recorder's lock is
// looked at, and how often then.
const quietFor = 30 * time.Second

// note keeps a record as the last of its gauge or probe.
func (w *Onlooker) note(r *segment.Record) {
	k, ok := w.place(r)
	if !ok {
		return
	}
	l := &w.last[k]
	if l.Seen && r.Time < l.Wall {
		return // kept from before a mark, and written after what is newer
	}
	l.Seen, l.Wall = true, r.Time
	l.MM, l.Shown, l.Unit = r.MM, r.MM, "mm"
	l.Celsius, l.HumidityPercent, l.GaugeStatus = math.NaN(), math.NaN(), ""
	if r.Point == nil {
		return
	}
	number := func(key string, into *float64) {
		if v, ok := r.Point.Value(key); ok {
			if f, ok := v.(float64); ok {
				*into = f
			}
		}
	}
	number("celsius", &l.Celsius)
	number("humidity_percent", &l.HumidityPercent)
	number("shown", &l.Shown)
	if v, ok := r.Point.Value("unit"); ok {
		l.Unit, _ = v.(string)
	}
	if v, ok := r.Point.Value("status"); ok {
		l.GaugeStatus, _ = v.(string)
	}
}

// newest is the stamp of the latest reading, 0 where there is none.
func (w *Onlooker) newest() int64 {
	t := int64(0)
	for i := range w.last {
		if w.last[i].Seen {
			t = max(t, w.last[i].Wall)
		}
	}
	return t
}

// publish makes the look that a recorder would give of itself.
func (w *Onlooker) publish(now time.Time) {
	s := &ingest.Status{At: ingest.SystemClock{}.Now(), Run: w.tape.run, Fault: w.events.fault, DiskFree: -1,
		ClockSynchronised: ingest.SystemClock{}.State().Synchronised, Last: slices.Clone(w.last)}
	if written := w.written(); !written.IsZero() {
		s.SyncAge = max(0, now.Sub(written))
	}
	s.Closed = !w.recorded(now, s.SyncAge)
	if free, err := w.dir.DiskFree(); err == nil {
		s.DiskFree = free
	}
	for i := range s.Last {
		l := &s.Last[i]
		l.Silent = !s.Closed && w.events.silent[l.Name]
		l.Age = ageOf(l, s.At)
	}
	w.status.Store(s)
	raised, ended := slices.Clone(w.events.alarms.Raised()), slices.Clone(w.events.alarms.Ended())
	if s.Closed {
		raised = nil // nobody watches any more
	}
	slices.Reverse(ended)
	slices.SortStableFunc(raised, bySeverity)
	for i := range raised {
		raised[i].ID = i + 1
	}
	w.mu.Lock()
	w.raised, w.ended = raised, ended
	w.mu.Unlock()
}

func ageOf(l *ingest.Last, at device.Instant) time.Duration {
	if !l.Seen {
		return 0
	}
	return time.Duration(max(0, at.Wall-l.Wall))
}

func bySeverity(a, b alarm.Alarm) int {
	if a.Level != b.Level {
		return int(b.Level) - int(a.Level)
	}
	return b.Raised.Compare(a.Raised)
}

// written is when the recorder last completed a write.
func (w *Onlooker) written() time.Time {
	latest := w.events.written
	if _, at, err := stat(w.tape.fs, w.tape.at); err == nil && at.After(latest) {
		latest = at
	}
	return latest
}

// recorded says whether a recorder has the run. Its lock is asked only where
// the files do not tell: asking takes it for an instant.
func (w *Onlooker) recorded(now time.Time, quiet time.Duration) bool {
	switch {
	case w.events.stopped || !w.events.started:
		return false
	case quiet < quietFor:
		w.held = true
		return true
	case now.Sub(w.asked) < quietFor:
		return w.held
	}
	w.asked = now
	_, held, err := w.dir.Holder()
	w.held = held || err != nil
	return w.held
}
