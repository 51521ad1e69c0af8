package live

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
)

// loadView is what hangs and for how long.
type loadView struct {
	Headline string
	Lines    []string
}

func (w speaker) load() loadView {
	l := w.s.Loads
	v := loadView{Headline: "No load is entered"}
	if len(l.Now) > 0 {
		var parts []string
		for _, n := range l.Now {
			parts = append(parts, n.Name+" "+n.Shown)
		}
		v.Headline = strings.Join(parts, ", ")
	}
	if l.Step != "" {
		v.Headline = "Step " + l.Step + ": " + v.Headline
	}
	if !l.Since.IsZero() {
		how := "by the mark"
		if l.Found {
			how = "as found in the readings"
		}
		v.Lines = append(v.Lines, fmt.Sprintf("For %s, since %s, %s.", desk.Span(w.s.At.Sub(l.Since).Truncate(time.Second)), w.day(l.Since), how))
	}
	if !l.Ends.IsZero() {
		if left := l.Ends.Sub(w.s.At); left > 0 {
			v.Lines = append(v.Lines, fmt.Sprintf("The plan holds it for another %s, until %s.", desk.Span(left.Truncate(time.Minute)), w.day(l.Ends)))
		} else {
			v.Lines = append(v.Lines, "Its planned time was over at "+w.day(l.Ends)+"; the recording goes on.")
		}
	}
	plan := w.d.Rig().Plan
	if next := l.Planned + 1; l.Planned >= 0 && next < len(plan) {
		v.Lines = append(v.Lines, "Next by the plan: "+plan[next].Step+setWords(plan[next])+".")
	}
	return v
}

// gaugeRow is one line of the table of gauges.
type gaugeRow struct {
	Name, At, Reading, Age, Sag, Net, Day, Left, Until string
	Tone                                               tone
	Status                                             string
}

func (w speaker) gauges() []gaugeRow {
	var out []gaugeRow
	for i, g := range w.s.Gauges {
		at := w.d.Rig().Gauges[i].At
		r := gaugeRow{Name: g.Name, At: at.Shown, Tone: green, Status: g.GaugeStatus}
		if g.Sees != "" && g.Sees != "beam" {
			r.At += ", sees a " + g.Sees
		}
		switch {
		case g.Silent:
			r.Tone = tone{yellow.Class, "silent"}
		case !g.Seen:
			r.Tone = tone{unknown.Class, "nothing yet"}
		default:
			r.Tone = tone{green.Class, "answers"}
		}
		for _, a := range w.s.Alarms {
			if a.Subject == g.Name && (a.Cause == "frozen" || a.Cause == "travel") {
				r.Tone = tone{toneOf(a.Level).Class, a.Cause}
			}
		}
		if g.Seen {
			r.Reading = desk.Fixed(g.MM, g.Resolution)
			r.Age = desk.Span(w.age(g.Last))
		}
		r.Sag, r.Day = signed(g.Sag, g.Resolution), signed(g.Day, g.Resolution)
		if g.TravelLeft != nil {
			r.Left = fmt.Sprintf("%s (%.0f %%)", desk.Fixed(*g.TravelLeft, g.Resolution), 100**g.TravelShare)
			r.Until = "not in sight"
		}
		if !g.RunsOut.IsZero() {
			r.Until = w.date(g.RunsOut)
		}
		if o := w.s.Outlook; o != nil {
			for _, s := range o.Sag {
				if s.Gauge == g.Name {
					r.Net = netWords(s)
				}
			}
		}
		out = append(out, r)
	}
	return out
}

func signed(v *float64, resolution float64) string {
	if v == nil {
		return ""
	}
	return desk.Signed(*v, resolution)
}

func netWords(s desk.NetSag) string {
	if s.U == nil {
		return desk.Signed(s.MM, 0.001)
	}
	return desk.Signed(s.MM, 0.001) + " ± " + desk.Fixed(*s.U, 0.001)
}

// corrected says what the corrected column holds, and of when.
func (w speaker) corrected() string {
	o := w.s.Outlook
	if o == nil || len(o.Sag) == 0 {
		return ""
	}
	return "Corrected: net of support movement and disturbances, by the analysis at " + w.day(time.Unix(0, o.At)) + "; ± is the standard uncertainty."
}

// outlookView is what the analysis foretells.
type outlookView struct {
	State     string
	Forecasts []forecastRow
	Note      string
	MayStop   []string
	Cautions  []string
}

type forecastRow struct{ After, Date, Sag, Band, Label string }

var labelWords = map[string]string{
	"plain": "", "caution": "with caution: far beyond the data", "informative": "for information only: very far beyond the data", "refused": "refused",
}

func (w speaker) outlook() outlookView {
	o := w.s.Outlook
	if o == nil {
		v := outlookView{State: "The analysis has not answered yet."}
		if w.s.OutlookError != "" {
			v.State = "The analysis cannot answer: " + w.s.OutlookError
		}
		return v
	}
	v := outlookView{State: "By the analysis, from what was on disk at " + w.day(time.Unix(0, o.At)) + "."}
	if w.s.OutlookError != "" {
		v.State += " A later try failed: " + w.s.OutlookError
	}
	for _, f := range o.Forecasts {
		r := forecastRow{After: f.After, Date: w.date(time.Unix(0, f.At)), Label: labelWords[f.Label]}
		if f.Refused != "" {
			r.Label = f.Refused
		} else {
			r.Sag = desk.Fixed(f.MM, 0.001)
		}
		if f.Lo != nil && f.Hi != nil {
			r.Band = desk.Fixed(*f.Lo, 0.001) + " to " + desk.Fixed(*f.Hi, 0.001)
		}
		v.Forecasts = append(v.Forecasts, r)
	}
	if len(o.Forecasts) == 0 {
		v.Note = "There is no forecast yet."
	} else if o.Gauge != "" {
		v.Note = "Sag of " + o.Gauge + ", corrected, mm, at a time after full load; in brackets the band that holds it with 95 %, if the fitted laws hold."
	}
	for _, m := range o.MayStop {
		if m.More <= 0 {
			v.MayStop = append(v.MayStop, fmt.Sprintf("Stop now: the farthest forecast is %s mm wide.", desk.Fixed(m.WidthMM, 0.001)))
		} else {
			v.MayStop = append(v.MayStop, fmt.Sprintf("Another %s: it would be %s mm wide.", desk.Span(m.More), desk.Fixed(m.WidthMM, 0.001)))
		}
	}
	return v
}

func (w speaker) room() []string {
	var out []string
	for _, p := range w.s.Probes {
		if !p.Seen {
			out = append(out, p.Name+": nothing yet")
			continue
		}
		var parts []string
		if !math.IsNaN(p.Celsius) {
			parts = append(parts, fmt.Sprintf("%.1f °C", p.Celsius))
		}
		if !math.IsNaN(p.HumidityPercent) {
			parts = append(parts, fmt.Sprintf("%.0f %% relative humidity", p.HumidityPercent))
		}
		line := p.Name + ": " + strings.Join(parts, ", ")
		if p.Silent {
			line += " (silent" + w.since(p) + ")"
		}
		out = append(out, line)
	}
	return out
}

// alarmRow is one alarm of the list.
type alarmRow struct {
	ID                                      int
	Tone                                    tone
	Cause, Text, Advice, Raised, Seen, Over string
}

func (w speaker) alarm(a alarm.Alarm) alarmRow {
	r := alarmRow{ID: a.ID, Tone: toneOf(a.Level), Cause: strings.ReplaceAll(a.Cause, "-", " "), Text: subject(a) + a.Text, Advice: a.Advice, Raised: w.day(a.Raised)}
	if !a.Seen.IsZero() {
		r.Seen = w.day(a.Seen)
		if a.SeenBy != "" {
			r.Seen += " by " + a.SeenBy
		}
	}
	if !a.Over.IsZero() {
		r.Over = w.day(a.Over)
	}
	return r
}

// oldSync is when the last completed sync is called old.
const oldSync = time.Minute

func (w speaker) machine() []fact {
	s := w.s.Status
	sync := fact{"Last sync to disk", desk.Span(s.SyncAge) + " ago", green}
	if s.SyncAge > oldSync {
		sync.Tone = yellow
	}
	disk := fact{"Disk", "free space not known", unknown}
	if s.DiskFree >= 0 {
		disk.Value, disk.Tone = desk.Bytes(s.DiskFree)+" free", green
	}
	if w.raised("disk") {
		disk.Tone = yellow
	}
	if s.Fault != "" {
		disk.Value, disk.Tone = s.Fault, yellow
	}
	clock := fact{"Clock", "kept by a time source", green}
	if !s.ClockSynchronised {
		clock.Value, clock.Tone = "not kept by a time source", yellow
	}
	stored := fact{"Readings kept", fmt.Sprintf("%s since this start", count(s.Stored)), green}
	if s.Dropped > 0 {
		stored.Value += fmt.Sprintf(", %s lost for want of room", count(s.Dropped))
		stored.Tone = yellow
	}
	out := []fact{sync, disk, clock, stored}
	if s.Waiting > 0 {
		out = append(out, fact{"Waiting for the disk", count(int64(s.Waiting)) + " readings", green})
	}
	if m := w.lastMark(); m != nil {
		out = append(out, fact{"Last mark", markWords(*m) + ", " + w.day(time.Unix(0, m.Time)), tone{}})
	}
	if w.s.Rebuilding {
		out = append(out, fact{"Plots", "earlier readings are still being read", unknown})
	}
	return out
}

// count prints a whole number with thin spaces between thousands.
func count(n int64) string {
	s := fmt.Sprint(n)
	if len(s) < 5 {
		return s
	}
	var b strings.Builder
	for i, c := range s {
		if i > 0 && (len(s)-i)%3 == 0 {
			b.WriteRune('\u202f')
		}
		b.WriteRune(c)
	}
	return b.String()
}

// lastMark is the mark entered last that counts; nil where there is none.
func (w speaker) lastMark() *ingest.Mark {
	for i := len(w.s.Marks) - 1; i >= 0; i-- {
		m := &w.s.Marks[i]
		if _, gone := w.s.Withdrawn[m.ID]; m.Withdraw == "" && (m.ID == "" || !gone) {
			return m
		}
	}
	return nil
}

// markRow is one mark of the list.
type markRow struct {
	ID, Words, When, By, Withdrawn string
}

// mostMarks bounds the marks listed on the page.
const mostMarks = 30

func (w speaker) marks() []markRow {
	var out []markRow
	for i := len(w.s.Marks) - 1; i >= 0 && len(out) < mostMarks; i-- {
		m := w.s.Marks[i]
		if m.Withdraw != "" {
			continue
		}
		r := markRow{ID: m.ID, Words: markWords(m), When: w.day(time.Unix(0, m.Time)), By: m.By}
		if why, gone := w.s.Withdrawn[m.ID]; gone && m.ID != "" {
			r.Withdrawn = why
			if why == "" {
				r.Withdrawn = "no reason given"
			}
		}
		out = append(out, r)
	}
	return out
}

// markWords says what a mark says.
func markWords(m ingest.Mark) string {
	var parts []string
	if m.Step != "" {
		parts = append(parts, "step "+m.Step)
	}
	for _, l := range m.Loads {
		parts = append(parts, l.Name+" "+l.Shown)
	}
	if m.Act != "" {
		parts = append(parts, m.Gauge+" "+m.Act)
	}
	if m.Note != "" {
		parts = append(parts, m.Note)
	}
	return strings.Join(parts, ", ")
}

// stepButton is a planned step.
type stepButton struct {
	Name, Set, Hold string
	Now, Next       bool
}

func (w speaker) steps() []stepButton {
	var out []stepButton
	for i, p := range w.d.Rig().Plan {
		out = append(out, stepButton{Name: p.Step, Set: strings.TrimPrefix(setWords(p), ": "), Hold: p.Hold.Shown,
			Now: i == w.s.Loads.Planned, Next: i == w.s.Loads.Planned+1})
	}
	return out
}

// brief is a run in the list of runs.
type brief struct {
	Path, Title string
	Banner      answer
	Alive       answer
}

func (p *page) brief() brief {
	w := speaker{p.desk, p.desk.Snapshot()}
	return brief{p.path(), titleOf(p.desk), w.banner(), w.alive()}
}
