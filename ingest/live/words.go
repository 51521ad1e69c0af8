package live

import (
	"fmt"
	"html/template"
	"math"
	"strings"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
)

// tone is the class of a coloured mark: the meanings of IEC 60073, or none
// where nothing is known. A word always stands beside it.
type tone struct{ Class, Word string }

var (
	green   = tone{"normal", "normal"}
	yellow  = tone{"abnormal", "abnormal"}
	red     = tone{"danger", "danger"}
	unknown = tone{"unknown", "not known"}
)

func toneOf(l alarm.Level) tone {
	return [...]tone{alarm.Normal: green, alarm.Abnormal: yellow, alarm.Danger: red}[l]
}

// answer is one of the five questions with what there is to say.
type answer struct {
	Tone  tone
	Short string
	More  []string
}

// wordsView is everything the sections are rendered from, in words.
type wordsView struct {
	Known                                    bool
	Path                                     string
	At                                       string
	Banner                                   answer
	Alive, Knocked, Travel, Yesterday, Speed answer
	Load                                     loadView
	Gauges                                   []gaugeRow
	Corrected                                string
	Plots                                    template.HTML
	Outlook                                  outlookView
	Room                                     []string
	Alarms, Past                             []alarmRow
	Machine                                  []fact
	Steps                                    []stepButton
	Marks                                    []markRow
}

// fact is a name with a value.
type fact struct {
	Name, Value string
	Tone        tone
}

// speaker words one snapshot.
type speaker struct {
	d *desk.Desk
	s *desk.Snapshot
}

// words words a snapshot.
func words(d *desk.Desk, s *desk.Snapshot) wordsView {
	w := speaker{d, s}
	v := wordsView{
		At:     w.clock(s.At),
		Banner: w.banner(), Alive: w.alive(), Knocked: w.knocked(), Travel: w.travel(), Yesterday: w.yesterday(), Speed: w.speed(),
		Load: w.load(), Gauges: w.gauges(), Corrected: w.corrected(), Outlook: w.outlook(), Room: w.room(),
		Machine: w.machine(), Steps: w.steps(), Marks: w.marks(),
	}
	for _, a := range s.Alarms {
		v.Alarms = append(v.Alarms, w.alarm(a))
	}
	for _, a := range s.PastAlarms {
		if s.At.Sub(a.Over) < 7*24*time.Hour {
			v.Past = append(v.Past, w.alarm(a))
		}
	}
	return v
}

func (w speaker) clock(t time.Time) string {
	return w.d.Local(t).Format("Mon 2 Jan 2006, 15:04:05 MST")
}

// day is an instant with its day where that is not today.
func (w speaker) day(t time.Time) string {
	t = w.d.Local(t)
	y, m, d := w.d.Local(w.s.At).Date()
	switch ty, tm, td := t.Date(); {
	case y == ty && m == tm && d == td:
		return t.Format("15:04")
	case y == ty:
		return t.Format("Mon 2 Jan 15:04")
	}
	return t.Format("2 Jan 2006 15:04")
}

func (w speaker) date(t time.Time) string { return w.d.Local(t).Format("2 Jan 2006") }

func (w speaker) banner() answer {
	a := answer{Tone: green, Short: "No alarm"}
	if len(w.s.Alarms) == 0 {
		return a
	}
	worst := w.s.Alarms[0]
	a.Tone = toneOf(worst.Level)
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

func (w speaker) alive() answer {
	st := w.s.Status
	if st.Closed {
		return answer{yellow, "No: the recording has ended", nil}
	}
	if len(st.Last) == 0 {
		return answer{unknown, "The recording is starting", nil}
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
		more = append(more, "The newest reading is "+desk.Span(newest)+" old.")
	}
	if len(waiting) > 0 {
		more = append(more, "Nothing yet from "+strings.Join(waiting, ", ")+".")
	}
	switch {
	case len(silent) > 0:
		return answer{yellow, "Not wholly: " + count, append([]string{"Silent: " + strings.Join(silent, ", ") + "."}, more...)}
	case alive == 0:
		return answer{unknown, "Nothing has come yet", more}
	}
	return answer{green, "Yes: " + count, more}
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

// knockWords words the kinds of disturbance that the second question is about.
var knockWords = map[string]string{
	"bench-knock": "the bench was knocked", "gauge-knock": "a gauge was knocked", "zero-pressed": "a zero was pressed",
	"support-shift": "a support moved", "load-change": "the load changed without a mark", "unit-key": "the unit was changed",
	"undecided": "something moved a gauge",
}

func (w speaker) knocked() answer {
	from := "since yesterday " + w.d.Local(w.s.At).Format("15:04")
	o := w.s.Outlook
	if o == nil {
		a := answer{unknown, "Not looked at yet", []string{"The analysis beside the recording has not answered."}}
		if w.s.OutlookError != "" {
			a.More = []string{"The analysis says: " + w.s.OutlookError}
		}
		return a
	}
	var found []string
	for _, b := range o.Disturbances {
		words, listed := knockWords[b.Kind]
		at := time.Unix(0, b.From)
		if !listed || w.s.At.Sub(at) > 24*time.Hour {
			continue
		}
		line := w.day(at) + ": " + words
		if len(b.Gauges) > 0 {
			line += " (" + strings.Join(b.Gauges, ", ") + ")"
		}
		if b.Size != nil {
			line += ", " + desk.Signed(*b.Size, 0.001) + " mm"
		}
		if b.Load != nil {
			line += fmt.Sprintf(", about %+.3g N", *b.Load)
		}
		if b.Treated != "" {
			line += "; " + b.Treated
		}
		found = append(found, line)
	}
	if len(found) == 0 {
		return answer{green, "No: nothing found " + from, []string{"Looked at up to " + w.day(time.Unix(0, o.At)) + "."}}
	}
	if len(found) > 6 {
		found = append(found[len(found)-6:], fmt.Sprintf("and %d before", len(found)-6))
	}
	return answer{yellow, fmt.Sprintf("Yes: %d %s %s", len(found), plural(len(found), "disturbance"), from), found}
}

func plural(n int, word string) string {
	if n == 1 {
		return word
	}
	return word + "s"
}

func (w speaker) travel() answer {
	var least *desk.Gauge
	for i := range w.s.Gauges {
		g := &w.s.Gauges[i]
		if g.TravelLeft != nil && (least == nil || *g.TravelShare < *least.TravelShare) {
			least = g
		}
	}
	if least == nil {
		return answer{unknown, "The rig file states no travel", nil}
	}
	a := answer{green, fmt.Sprintf("%s mm at %s, %.0f %% of its travel", desk.Fixed(*least.TravelLeft, least.Resolution), least.Name, 100**least.TravelShare), nil}
	if w.raised("travel") {
		a.Tone = yellow
	}
	var first *desk.Gauge
	for i := range w.s.Gauges {
		g := &w.s.Gauges[i]
		if !g.RunsOut.IsZero() && (first == nil || g.RunsOut.Before(first.RunsOut)) {
			first = g
		}
	}
	if first != nil {
		a.More = append(a.More, fmt.Sprintf("At its present rate %s runs out about %s.", first.Name, w.date(first.RunsOut)))
	} else {
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

func (w speaker) yesterday() answer {
	g := w.lead()
	if g == nil {
		return answer{unknown, "Nothing to compare yet", nil}
	}
	now := fmt.Sprintf("Sag now %s mm at %s, uncorrected", desk.Fixed(*g.Sag, g.Resolution), g.Name) + w.net(g.Name) + "."
	if w.s.Loads.First.IsZero() {
		now = fmt.Sprintf("No load is entered yet. %s shows %s mm.", g.Name, desk.Fixed(g.MM, g.Resolution))
	}
	changed := ""
	if l := w.s.Loads.Since; !l.IsZero() && w.s.At.Sub(l) < 24*time.Hour {
		changed = "The load changed at " + w.day(l) + ", in between."
	}
	a := answer{Tone: green, More: []string{now}}
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
		a.Tone, a.Short = unknown, "Too young to compare"
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

func (w speaker) speed() answer {
	g := w.lead()
	if g == nil || g.Trend == nil {
		return answer{unknown, "Too early to say", []string{"Two equal intervals since the last load change are compared, ten minutes each at least."}}
	}
	t, least := g.Trend, differCounts*g.Resolution
	over := hours(t.Over)
	a := answer{Tone: green, More: []string{fmt.Sprintf("%s: %s mm in the last %s, %s mm in the %s before, uncorrected.",
		g.Name, desk.Signed(t.Last, g.Resolution), over, desk.Signed(t.Before, g.Resolution), over)}}
	switch {
	case math.Abs(t.Last-t.Before) <= least:
		a.Short = "No: about as fast as before"
	case math.Abs(t.Last) < math.Abs(t.Before):
		a.Short = "No: slowing down"
	default:
		a.Tone, a.Short = yellow, "Yes: faster than before"
	}
	if o := w.s.Outlook; o != nil {
		if o.Rate != nil {
			line := fmt.Sprintf("Creep rate at %s by the analysis: %+.3g mm/d", o.Gauge, *o.Rate)
			if o.RateU != nil {
				line += fmt.Sprintf(" (u = %.2g mm/d)", *o.RateU)
			}
			if o.Stage != "" {
				line += ", " + o.Stage + " stage"
			}
			a.More = append(a.More, line+".")
		}
		if o.ClearArea != 0 || o.Caution != 0 {
			a.Tone, a.Short = yellow, "Yes: the analysis asks for caution"
			if o.ClearArea != 0 {
				a.Tone, a.Short = red, "Yes: clear the area"
			}
		}
	}
	return a
}
