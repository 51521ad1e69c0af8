package desk

import (
	"fmt"
	"strings"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/segment"
)

// Thresholds of alarms that the rig file does not set. The shares by which a
// value must come back before an alarm ends keep it from flickering.
const (
	quietAtStart  = 60 * time.Second // before a gauge that never spoke is called silent
	disturbedFor  = 24 * time.Hour   // how long a knock is worth telling
	travelShare   = 0.10             // of the travel, where limits.travel_left is not given
	catcherShare  = 0.80             // of the gap under the load
	comeBack      = 0.02
	travelBack    = 0.10
	spaceBack     = 0.20
	kelvinBack    = 0.3
	runOutBack    = 1.25
	movedCounts   = 5 // resolutions: how far others move while a frozen gauge does not
	fewestOthers  = 2 // other gauges that must have moved
	outlookFor    = time.Hour
	atSupportNear = 0.02 // of the span: a gauge there hardly moves
)

// facts gathers what the alarms are decided by.
func (d *Desk) facts(now time.Time, s *ingest.Status) []alarm.Fact {
	var f []alarm.Fact
	snapshot := d.snapshot.Load()
	f = append(f, d.silentFacts(s)...)
	f = append(f, d.frozenFacts()...)
	f = append(f, d.travelFacts(now, snapshot.Gauges)...)
	f = append(f, d.sagFacts(now, snapshot.Gauges)...)
	f = append(f, d.analysisFacts(now)...)
	f = append(f, d.temperatureFacts(s)...)
	f = append(f, d.machineFacts(s)...)
	return append(f, d.forwardFact(snapshot))
}

// forwardFact asks for an alarm where the sending to a server waits for a
// person. A server that is merely absent is tried for ever and needs none.
func (d *Desk) forwardFact(s *Snapshot) alarm.Fact {
	f := alarm.Fact{Cause: "forward", Wish: alarm.Over}
	if s.Forward != nil && s.Forward.Held {
		f.Wish, f.Text = alarm.Raise, "the readings do not reach the server: "+s.Forward.Words
	}
	return f
}

func (d *Desk) silentFacts(s *ingest.Status) []alarm.Fact {
	var out []alarm.Fact
	for _, l := range s.Last {
		f := alarm.Fact{Cause: "silent", Subject: l.Name, Wish: alarm.Over}
		switch {
		case l.Silent && l.Seen:
			f.Wish, f.Text = alarm.Raise, "nothing has come from it since "+d.Local(time.Unix(0, l.Wall)).Format("2 Jan 15:04:05")
		case l.Silent, !l.Seen && !d.onButton(l) && time.Duration(s.At.Boot-d.o.Start.Boot) > quietAtStart:
			f.Wish, f.Text = alarm.Raise, "nothing has come from it since the recording began"
		case !l.Seen:
			f.Wish = alarm.Leave
		}
		out = append(out, f)
	}
	return out
}

// onButton says whether a gauge or probe sends only when its button is pressed.
func (d *Desk) onButton(l ingest.Last) bool {
	frame := ""
	for _, g := range d.o.Rig.Gauges {
		if g.Name == l.Name && !l.Probe {
			frame = g.Frame
		}
	}
	for _, p := range d.o.Rig.Probes {
		if p.Name == l.Name && l.Probe {
			frame = p.Frame
		}
	}
	for _, f := range d.o.Rig.Frames {
		if f.Name == frame {
			return f.Button
		}
	}
	return false
}

// knocks are the kinds of disturbance that somebody or something caused.
var knocks = map[string]string{
	"bench-knock": "the bench was knocked", "gauge-knock": "the gauge was knocked",
	"support-shift": "a support moved", "zero-pressed": "its zero was pressed",
	"load-change": "the load changed without a mark",
}

func (d *Desk) analysisFacts(now time.Time) []alarm.Fact {
	o := d.outlook.outlook
	if o == nil {
		return d.engine.Waiting("clear-area", "caution", "knock", "load-changed")
	}
	var out []alarm.Fact
	if o.ClearArea != 0 {
		out = append(out, alarm.Fact{Cause: "clear-area", Wish: alarm.Raise, Text: "the sag accelerates as before a failure, since " + d.Local(time.Unix(0, o.ClearArea)).Format("2 Jan 15:04")})
	}
	if o.Caution != 0 {
		out = append(out, alarm.Fact{Cause: "caution", Wish: alarm.Raise, Text: "the sag grows faster, since " + d.Local(time.Unix(0, o.Caution)).Format("2 Jan 15:04")})
	}
	for _, b := range o.Disturbances {
		words, known := knocks[b.Kind]
		if !known || now.Sub(time.Unix(0, b.From)) > disturbedFor {
			continue
		}
		cause := "knock"
		if b.Kind == "load-change" {
			cause = "load-changed"
		}
		text := words + " at " + d.Local(time.Unix(0, b.From)).Format("2 Jan 15:04")
		if b.Size != nil {
			text += ", " + Signed(*b.Size, 0.001) + " mm"
		}
		if b.Load != nil {
			text += fmt.Sprintf(", about %+.3g N", *b.Load)
		}
		subject := strings.Join(b.Gauges, " ")
		if len(b.Gauges) != 1 {
			subject = ""
			if len(b.Gauges) > 1 {
				text += " (" + strings.Join(b.Gauges, ", ") + ")"
			}
		}
		out = append(out, alarm.Fact{Cause: cause, Subject: subject, Wish: alarm.Raise, Text: text})
	}
	return out
}

func (d *Desk) machineFacts(s *ingest.Status) []alarm.Fact {
	disk := alarm.Fact{Cause: "disk", Wish: alarm.Over}
	least := d.o.Rig.Alarms.DiskFree.Value
	switch free := float64(s.DiskFree); {
	case s.Fault != "":
		disk.Wish, disk.Text = alarm.Raise, s.Fault
	case free >= 0 && free < least:
		disk.Wish, disk.Text = alarm.Raise, Bytes(s.DiskFree)+" are free"
	case free >= 0 && free < (1+spaceBack)*least:
		disk.Wish = alarm.Leave
	}
	clock := alarm.Fact{Cause: "clock", Wish: alarm.Over}
	if !s.ClockSynchronised {
		clock.Wish, clock.Text = alarm.Raise, "no time source keeps this machine's clock"
	}
	return []alarm.Fact{disk, clock}
}

// restoreAlarms tells the engine what earlier recorders raised.
func (d *Desk) restoreAlarms() {
	records, err := eventsOf(d.o.FS)
	if err != nil {
		d.o.Log.Warn("the alarms raised before are not known", "error", err)
		return
	}
	var l alarm.Ledger
	for _, r := range records {
		if r.Kind != segment.Event || r.Point == nil {
			continue
		}
		detail, _ := r.Point.Value("detail")
		text, _ := detail.(string)
		l.Take(r.Name, r.Point.Tag("gauge"), text, time.Unix(0, r.Time))
	}
	d.engine.Restore(&l)
}
