package answer

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
)

func (w speaker) banner() Answer {
	a := Answer{Tone: Normal, Short: "No alarm"}
	if len(w.s.Alarms) == 0 {
		return a
	}
	worst := w.s.Alarms[0]
	a.Tone = ToneOf(worst.Level)
	if len(w.s.Alarms) == 1 {
		a.Short = "One alarm: " + subject(worst) + worst.Text
	} else {
		a.Short = fmt.Sprintf("%d alarms, first: %s%s", len(w.s.Alarms), subject(worst), worst.Text)
	}
	a.More = []string{worst.Advice}
	return a
}

func subject(a alarm.Alarm) string {
	if a.Subject == "" {
		return ""
	}
	return a.Subject + ": "
}

func (w speaker) alive() Answer {
	st := w.s.Status
	if st.Closed {
		a := Answer{Abnormal, "No: the recording has ended", nil}
		if t := w.newest(); t != 0 {
			a.More = []string{"The last reading came at " + w.day(time.Unix(0, t)) + "."}
		}
		return a
	}
	if len(st.Last) == 0 {
		return Answer{Unknown, "The recording is starting", nil}
	}
	var silent, waiting []string
	newest := time.Duration(math.MaxInt64)
	for _, l := range st.Last {
		switch {
		case l.Silent:
			silent = append(silent, l.Name+w.since(l))
		case !l.Seen:
			waiting = append(waiting, l.Name)
		default:
			newest = min(newest, w.age(l))
		}
	}
	alive := len(st.Last) - len(silent) - len(waiting)
	count := fmt.Sprintf("%d of %d instruments answer", alive, len(st.Last))
	var more []string
	if newest != math.MaxInt64 {
		more = append(more, "The newest reading"+w.onDisk()+" is "+desk.Span(newest)+" old.")
	}
	if len(waiting) > 0 {
		more = append(more, "Nothing yet from "+strings.Join(waiting, ", ")+".")
	}
	switch {
	case len(silent) > 0:
		return Answer{Abnormal, "Not wholly: " + count, append([]string{"Silent: " + strings.Join(silent, ", ") + "."}, more...)}
	case alive == 0:
		return Answer{Unknown, "Nothing has come yet", more}
	}
	return Answer{Normal, "Yes: " + count, more}
}

// newest is the stamp of the latest reading, 0 where there is none.
func (w speaker) newest() int64 {
	t := int64(0)
	for _, l := range w.s.Status.Last {
		if l.Seen {
			t = max(t, l.Wall)
		}
	}
	return t
}

// onDisk is said where what is known is what another process has written.
func (w speaker) onDisk() string {
	if w.s.Onlooking {
		return " on disk"
	}
	return ""
}

// present is now, or the end of a recording that has ended: what the last day is
// counted back from.
func (w speaker) present() time.Time {
	if t := w.newest(); w.s.Status.Closed && t != 0 {
		return time.Unix(0, t)
	}
	return w.s.At
}

// age is how old a reading is now: its age at the recorder's look, and the
// time since then.
func (w speaker) age(l ingest.Last) time.Duration {
	return max(0, l.Age+time.Duration(w.s.At.UnixNano()-w.s.Status.At.Wall))
}

func (w speaker) since(l ingest.Last) string {
	if !l.Seen {
		return ""
	}
	return " since " + w.day(time.Unix(0, l.Wall))
}

func (w speaker) travel() Answer {
	var least *desk.Gauge
	for i := range w.s.Gauges {
		g := &w.s.Gauges[i]
		if g.TravelLeft != nil && (least == nil || *g.TravelShare < *least.TravelShare) {
			least = g
		}
	}
	if least == nil {
		return Answer{Unknown, "The rig file states no travel", nil}
	}
	a := Answer{Normal, fmt.Sprintf("%s mm at %s, %.0f %% of its travel", desk.Fixed(*least.TravelLeft, least.Resolution), least.Name, 100**least.TravelShare), nil}
	if w.raised("travel") {
		a.Tone = Abnormal
	}
	var first *desk.Gauge
	for i := range w.s.Gauges {
		g := &w.s.Gauges[i]
		if !g.RunsOut.IsZero() && (first == nil || g.RunsOut.Before(first.RunsOut)) {
			first = g
		}
	}
	switch {
	case w.s.Status.Closed:
	case first != nil:
		a.More = append(a.More, fmt.Sprintf("At its present rate %s runs out about %s.", first.Name, w.date(first.RunsOut)))
	default:
		a.More = append(a.More, "No gauge moves fast enough to run out in sight.")
	}
	return a
}

func (w speaker) raised(cause string) bool {
	for _, a := range w.s.Alarms {
		if a.Cause == cause {
			return true
		}
	}
	return false
}

func (w speaker) yesterday() Answer {
	g := w.lead()
	if g == nil {
		return Answer{Unknown, "Nothing to compare yet", nil}
	}
	when := "now"
	if w.s.Status.Closed {
		when = "at the end"
	}
	now := fmt.Sprintf("Sag %s %s mm at %s, uncorrected", when, desk.Fixed(*g.Sag, g.Resolution), g.Name) + w.net(g.Name) + "."
	if w.s.Loads.First.IsZero() {
		now = fmt.Sprintf("No load is entered yet. %s shows %s mm.", g.Name, desk.Fixed(g.MM, g.Resolution))
	}
	changed := ""
	if l := w.s.Loads.Since; !l.IsZero() && w.present().Sub(l) < 24*time.Hour {
		changed = "The load changed at " + w.day(l) + ", in between."
	}
	a := Answer{Tone: Normal, More: []string{now}}
	switch {
	case g.Day != nil:
		a.Short = desk.Signed(*g.Day, g.Resolution) + " mm at " + g.Name + " in 24 h"
		if changed != "" {
			a.More = append(a.More, changed)
		}
	case g.Trend != nil:
		a.Short = fmt.Sprintf("%s mm at %s in the last %s", desk.Signed(g.Trend.Last, g.Resolution), g.Name, hours(g.Trend.Over))
		a.More = append(a.More, "The run is younger than a day.")
	default:
		a.Tone, a.Short = Unknown, "Too young to compare"
		if changed != "" {
			a.More = append(a.More, "The load changed at "+w.day(w.s.Loads.Since)+".")
		}
	}
	return a
}

// hours words one of the intervals that are compared.
func hours(d time.Duration) string {
	switch d {
	case 24 * time.Hour:
		return "24 h"
	case time.Hour:
		return "hour"
	}
	return desk.Span(d)
}

// differCounts is how many counts of the resolution two changes must differ by
// to be called different.
const differCounts = 2

func (w speaker) speed() Answer {
	g := w.lead()
	if g == nil || g.Trend == nil {
		return Answer{Unknown, "Too early to say", []string{"Two equal intervals since the last load change are compared, ten minutes each at least."}}
	}
	t, least := g.Trend, differCounts*g.Resolution
	over := hours(t.Over)
	a := Answer{Tone: Normal, More: []string{fmt.Sprintf("%s: %s mm in the last %s, %s mm in the %s before, uncorrected.",
		g.Name, desk.Signed(t.Last, g.Resolution), over, desk.Signed(t.Before, g.Resolution), over)}}
	switch {
	case math.Abs(t.Last-t.Before) <= least:
		a.Short = "No: about as fast as before"
	case math.Abs(t.Last) < math.Abs(t.Before):
		a.Short = "No: slowing down"
	default:
		a.Tone, a.Short = Abnormal, "Yes: faster than before"
	}
	if o := w.s.Outlook; o != nil {
		if o.Rate != nil {
			where := o.Gauge
			if o.Step != "" && o.Step != w.s.Loads.Step {
				where += " in step " + o.Step
			}
			line := fmt.Sprintf("Creep rate at %s by the analysis: %+.3g mm/d", where, *o.Rate)
			if o.RateU != nil {
				line += fmt.Sprintf(" (u = %.2g mm/d)", *o.RateU)
			}
			if o.Stage != "" {
				line += ", " + o.Stage + " stage"
			}
			a.More = append(a.More, line+".")
		}
		if o.ClearArea != 0 || o.Caution != 0 {
			a.Tone, a.Short = Abnormal, "Yes: the analysis asks for caution"
			if o.ClearArea != 0 {
				a.Tone, a.Short = Danger, "Yes: clear the area"
			}
		}
	}
	return a
}

// lead is the gauge that the short answers speak of: the creep gauge, or the
// one with the greatest sag.
func (w speaker) lead() *desk.Gauge {
	var best *desk.Gauge
	for i := range w.s.Gauges {
		g := &w.s.Gauges[i]
		if !g.Seen || g.Sag == nil || g.Sees != "beam" && g.Sees != "" {
			continue
		}
		if g.Name == w.d.Rig().Read.CreepGauge {
			return g
		}
		if best == nil || *g.Sag > *best.Sag {
			best = g
		}
	}
	return best
}

// net is the corrected sag of a gauge, with its age, where there is one.
func (w speaker) net(gauge string) string {
	if o := w.s.Outlook; o != nil {
		for _, s := range o.Sag {
			if s.Gauge == gauge {
				return "; " + desk.Fixed(s.MM, 0.001) + " mm corrected, at " + w.day(time.Unix(0, o.At))
			}
		}
	}
	return ""
}
