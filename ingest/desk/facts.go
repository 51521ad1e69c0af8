package desk

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
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
	return append(f, d.machineFacts(s)...)
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

// stillness is how long a gauge's indication has been the same, and what the
// others showed when it became so.
type stillness struct {
	seen   bool
	value  float64
	from   int64 // ns by the wall clock
	latest int64
	others []float64
}

// moved follows the indications for the frozen alarm.
func (d *Desk) moved(i int, t int64, v float64) {
	s := &d.still[i]
	s.latest = t
	if s.seen && s.value == v {
		return
	}
	if s.others == nil {
		s.others = make([]float64, len(d.still))
	}
	s.seen, s.value, s.from = true, v, t
	for k := range d.still {
		s.others[k] = math.NaN()
		if d.still[k].seen {
			s.others[k] = d.still[k].value
		}
	}
}

// frozenFacts finds gauges that show the same while others move. Repeats alone
// are ordinary when creep is slow: the neighbours decide.
func (d *Desk) frozenFacts() []alarm.Fact {
	var out []alarm.Fact
	after := int64(d.o.Rig.Alarms.FrozenAfter.Value * 1e9)
	for i := range d.still {
		s := &d.still[i]
		if !s.seen || !d.shouldMove(i) {
			continue
		}
		f := alarm.Fact{Cause: "frozen", Subject: d.o.Rig.Gauges[i].Name, Wish: alarm.Over}
		if s.latest-s.from >= after {
			others := 0
			for k := range d.still {
				if k != i && d.shouldMove(k) && math.Abs(d.still[k].value-s.others[k]) > movedCounts*d.o.Rig.Gauges[k].Resolution.Value {
					others++
				}
			}
			f.Wish = alarm.Leave
			if others >= fewestOthers {
				f.Wish = alarm.Raise
				f.Text = fmt.Sprintf("it has shown %s mm for %s while %d other gauges moved", Fixed(s.value, s.resolution(d, i)), Span(time.Duration(s.latest-s.from)), others)
			}
		}
		out = append(out, f)
	}
	return out
}

func (s *stillness) resolution(d *Desk, i int) float64 { return d.o.Rig.Gauges[i].Resolution.Value }

// shouldMove says whether a gauge sees the beam away from its supports.
func (d *Desk) shouldMove(i int) bool {
	g := &d.o.Rig.Gauges[i]
	if g.Sees != "beam" && g.Sees != "" {
		return false
	}
	for _, s := range d.o.Rig.Supports {
		if math.Abs(s.At.Value-g.At.Value) < atSupportNear*span(d.o.Rig) {
			return false
		}
	}
	return true
}

// span is the distance between the outermost supports, or the beam's length
// where it has one support only, mm.
func span(rig *config.Rig) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, s := range rig.Supports {
		low, high = min(low, s.At.Value), max(high, s.At.Value)
	}
	if high > low {
		return high - low
	}
	return rig.Specimen.Length.Value
}

func (d *Desk) travelFacts(now time.Time, gauges []Gauge) []alarm.Fact {
	var out []alarm.Fact
	within := time.Duration(d.o.Rig.Alarms.TravelWithin.Value * 1e9)
	for _, g := range gauges {
		if g.TravelLeft == nil {
			continue
		}
		least := travelShare * *g.TravelLeft / *g.TravelShare
		if l := d.o.Rig.Limits.TravelLeft; l != nil {
			least = l.Value
		}
		f := alarm.Fact{Cause: "travel", Subject: g.Name, Wish: alarm.Over}
		soon := !g.RunsOut.IsZero() && g.RunsOut.Sub(now) < within
		soonish := !g.RunsOut.IsZero() && g.RunsOut.Sub(now) < time.Duration(runOutBack*float64(within))
		text := fmt.Sprintf("%s mm of travel are left", Fixed(*g.TravelLeft, g.Resolution))
		switch {
		case *g.TravelLeft < least:
			f.Wish, f.Text = alarm.Raise, text
		case soon:
			f.Wish, f.Text = alarm.Raise, text+", at the present rate until "+d.Local(g.RunsOut).Format("2 Jan 2006")
		case *g.TravelLeft < (1+travelBack)*least, soonish:
			f.Wish = alarm.Leave
		}
		out = append(out, f)
	}
	return out
}

// sagFacts compares the greatest sag with the limits: the analysis's figures
// where they are fresh, else the uncorrected ones, and says which.
func (d *Desk) sagFacts(now time.Time, gauges []Gauge) []alarm.Fact {
	name, sag, kind := d.greatestSag(now, gauges)
	if name == "" {
		return nil
	}
	l := d.o.Rig.Limits
	text := fmt.Sprintf("the sag at %s is %.3f mm (%s)", name, sag, kind)
	var out []alarm.Fact
	if l.Sag != nil {
		out = append(out, above("sag", sag, l.Sag.Value, text+fmt.Sprintf(", the limit %s", l.Sag.Shown)))
	}
	if l.CatcherGap != nil {
		out = append(out, above("catcher", sag, catcherShare*l.CatcherGap.Value, text+fmt.Sprintf(", the gap under the load %s", l.CatcherGap.Shown)))
	}
	if l.SpanOverSag != nil {
		most := span(d.o.Rig) / l.SpanOverSag.Value
		out = append(out, above("span-over-sag", sag, most, text+fmt.Sprintf(", the span over it %.0f, the limit %s", span(d.o.Rig)/max(sag, 1e-9), l.SpanOverSag.Shown)))
	}
	return out
}

func above(cause string, value, limit float64, text string) alarm.Fact {
	f := alarm.Fact{Cause: cause, Wish: alarm.Over, Text: text}
	switch {
	case value >= limit:
		f.Wish = alarm.Raise
	case value >= (1-comeBack)*limit:
		f.Wish = alarm.Leave
	}
	return f
}

func (d *Desk) greatestSag(now time.Time, gauges []Gauge) (name string, sag float64, kind string) {
	for _, g := range gauges {
		if g.Sag != nil && (g.Sees == "beam" || g.Sees == "") && (name == "" || *g.Sag > sag) {
			name, sag, kind = g.Name, *g.Sag, "uncorrected"
		}
	}
	o := d.outlook.outlook
	if o == nil || now.Sub(time.Unix(0, o.At)) > outlookFor {
		return name, sag, kind
	}
	corrected := false
	for _, s := range o.Sag {
		// An uncorrected sag beyond a corrected one is news since the last
		// look of the analysis, or a disturbance it has taken out.
		if !corrected || s.MM > sag {
			name, sag, kind, corrected = s.Gauge, s.MM, "corrected", true
		}
	}
	for _, g := range gauges {
		if g.Sag != nil && corrected && g.Name == name && *g.Sag > sag && g.Wall > o.At+int64(2*time.Minute) {
			sag, kind = *g.Sag, "uncorrected"
		}
	}
	return name, sag, kind
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
		return nil
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

func (d *Desk) temperatureFacts(s *ingest.Status) []alarm.Fact {
	band := d.o.Rig.Limits.Temperature
	if len(band) != 2 {
		return nil
	}
	var out []alarm.Fact
	for _, l := range s.Last {
		if !l.Probe || !l.Seen || l.Silent || math.IsNaN(l.Celsius) {
			continue
		}
		f := alarm.Fact{Cause: "temperature", Subject: l.Name, Wish: alarm.Over,
			Text: fmt.Sprintf("%.1f °C, wanted %s to %s", l.Celsius, band[0].Shown, band[1].Shown)}
		switch low, high := band[0].Value, band[1].Value; {
		case l.Celsius < low || l.Celsius > high:
			f.Wish = alarm.Raise
		case l.Celsius < low+kelvinBack || l.Celsius > high-kelvinBack:
			f.Wish = alarm.Leave
		}
		out = append(out, f)
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

// restoreAlarms tells the engine what was told within the last day.
func (d *Desk) restoreAlarms() {
	records, err := eventsOf(d.o.FS)
	if err != nil {
		return
	}
	for _, r := range records {
		if r.Name != ingest.AlarmRaised || r.Point == nil {
			continue
		}
		detail, _ := r.Point.Value("detail")
		text, _ := detail.(string)
		d.engine.Restore(r.Point.Tag("gauge"), text, time.Unix(0, r.Time))
	}
}
