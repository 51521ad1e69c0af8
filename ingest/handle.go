package ingest

import (
	"fmt"
	"time"

	"gaugelog/device"
)

// Handle takes the next event. Events come in order of their instants, but
// for readings of different ports, which may be a little out of order. Faults
// of the disk are no errors of Handle: they are recorded, and shown by Status.
// The errors are ErrClosed and an event that no rig of this run knows.
func (r *Recorder) Handle(e Event) error {
	if r.closed {
		return ErrClosed
	}
	r.collect()
	r.advance(e.At)
	var err error
	switch e.Kind {
	case ReadingTaken:
		err = r.reading(&e.Reading)
	case MarkSeen:
		r.mark(&e.Mark)
	case Happened:
		if err = e.What.check(); err == nil {
			r.happened(e.What)
		}
	}
	r.due()
	return err
}

func (r *Recorder) reading(d *device.Reading) error {
	switch d.Kind {
	case device.Indication, device.Ambient:
		return r.value(d)
	case device.NoReading:
		i, err := r.channelOf(d)
		if err != nil {
			return err
		}
		r.noNumber(i, d)
	case device.PortLost, device.PortBack:
		kind := PortLost
		if d.Kind == device.PortBack {
			kind = PortBack
		}
		r.portEvent(kind, d)
	case device.FramesRefused:
		r.refused(d)
	case device.UnitKey:
		r.happened(Happening{Kind: UnitKey, Gauge: d.Gauge, Detail: "the gauge now shows " + d.Unit})
	}
	return nil
}

func (r *Recorder) channelOf(d *device.Reading) (int, error) {
	if d.Probe != "" {
		if i, ok := r.probes[d.Probe]; ok {
			return i, nil
		}
		return 0, fmt.Errorf("probe %q is not in this run's rig", d.Probe)
	}
	if i, ok := r.gauges[d.Gauge]; ok {
		return i, nil
	}
	return 0, fmt.Errorf("gauge %q is not in this run's rig", d.Gauge)
}

// value takes an indication or an ambient reading: it goes into memory, may
// show a jump, and is stored where the sampling asks for it.
func (r *Recorder) value(d *device.Reading) error {
	i, err := r.channelOf(d)
	if err != nil {
		return err
	}
	c := r.channels[i]
	s := sample{boot: d.At.Boot, mm: d.MM + 0, shown: d.Shown, unit: d.Unit, status: d.Status}
	if c.probe {
		s.mm, s.shown, s.unit = d.Celsius, d.HumidityPercent, ""
		if notNumber(s.mm) && notNumber(s.shown) {
			return fmt.Errorf("probe %s: a reading without a number", c.name)
		}
	} else if notNumber(s.mm) {
		return fmt.Errorf("gauge %s: an indication that is no number", c.name)
	}
	s.wall = c.stamp(d.At.Boot + r.offset)
	r.spoke(i, s.boot)
	if c.seen {
		c.interval = max(0, s.boot-c.lastBoot)
	}
	jumped := c.remember(s)
	if jumped {
		r.fastUntil = r.now + fastFor
		r.changed(s.boot)
	}
	newest := c.memory.at(c.memory.next - 1)
	if !newest.kept && c.wants(newest, &r.policy) {
		r.keep(i, newest, false)
	}
	c.seen, c.lastBoot, c.lastWall = true, s.boot, s.wall
	c.unit, c.status = s.unit, s.status
	r.says(c, s.status)
	return nil
}

// keep puts a sample into the batch, or counts it as dropped where the bound
// on what waits for the disk is reached; it says whether it was taken.
func (r *Recorder) keep(i int, s *sample, late bool) bool {
	s.kept = true
	c := r.channels[i]
	c.stored, c.storedMM = true, s.mm
	if r.held >= r.o.mostWaiting() {
		if l := &r.dropped[i]; l.n == 0 {
			l.from = s.wall
		}
		r.dropped[i].n++
		r.lost++
		return false
	}
	r.filling.entries = append(r.filling.entries, entry{sample: *s, channel: int32(i), late: late})
	r.held++
	r.stored++
	return true
}

func (o *Options) mostWaiting() int {
	if o.MostWaiting > 0 {
		return o.MostWaiting
	}
	return usualMost
}

// mark takes a mark that is in the marks file: what memory holds around the
// moment it speaks of is stored, and everything is synced at once.
func (r *Recorder) mark(m *Mark) {
	if m.counts() {
		r.changed(min(m.Time-r.offset, r.now))
	}
	r.fastUntil = r.now + fastFor
	r.cut()
	r.send()
}

// changed begins the dense sampling around a change at the boot-time instant,
// and stores what memory still holds at full rate before and behind it.
func (r *Recorder) changed(at int64) {
	p := &r.policy
	p.changedAt = max(p.changedAt, at)
	if p.all || p.around == 0 {
		return
	}
	for _, c := range r.channels {
		c.densely.due = 0
	}
	r.recall(at-p.around, r.now)
}

// recall stores the samples of all channels from an instant on that were not,
// in order of their stamps.
func (r *Recorder) recall(from, to int64) {
	next := make([]uint64, len(r.channels))
	for i, c := range r.channels {
		next[i] = c.memory.first
	}
	late := true
	for {
		best := -1
		for i, c := range r.channels {
			for next[i] < c.memory.next {
				s := c.memory.at(next[i])
				if !s.kept && s.boot >= from && s.boot <= to {
					break
				}
				next[i]++
			}
			if next[i] < c.memory.next && (best < 0 || c.memory.at(next[i]).boot < r.channels[best].memory.at(next[best]).boot) {
				best = i
			}
		}
		if best < 0 {
			return
		}
		// keep remembers the newest stored value for the dead band; the
		// samples come in order, so that is the latest one recalled.
		if r.keep(best, r.channels[best].memory.at(next[best]), late) {
			late = false
		}
		next[best]++
	}
}

// happened puts an event of now into the batch.
func (r *Recorder) happened(h Happening) { r.happenedAt(h, r.wall()) }

func (r *Recorder) happenedAt(h Happening, wall int64) {
	if len(r.filling.events) >= mostEvents {
		if r.eventsLost.n == 0 {
			r.eventsLost.from = wall
		}
		r.eventsLost.n++
		return
	}
	r.filling.events = append(r.filling.events, dated{h, wall})
}

// portEvent notes the loss or return of a port for each gauge and probe on it.
func (r *Recorder) portEvent(kind string, d *device.Reading) {
	detail := d.Port
	if d.Detail != "" {
		detail += ": " + d.Detail
	}
	told := false
	for i, c := range r.channels {
		if c.port != d.Port || d.Port == "" {
			continue
		}
		told = true
		if r.silences[i].portMoved(d, r.now) {
			r.happened(Happening{Kind: kind, Gauge: c.name, Detail: detail})
		}
	}
	if !told {
		r.happened(Happening{Kind: kind, Gauge: d.Gauge, Detail: detail})
	}
}

// onlyOn names the one gauge or probe on a port; empty where there are several.
func (r *Recorder) onlyOn(port string) string {
	name := ""
	for _, c := range r.channels {
		if c.port == port && port != "" {
			if name != "" {
				return ""
			}
			name = c.name
		}
	}
	return name
}

func seconds(ns int64) string {
	return fmt.Sprintf("%.3f s", time.Duration(ns).Seconds())
}
