package answer

import (
	"fmt"
	"strings"
	"time"

	"gaugelog/ingest/desk"
)

// Load says what hangs, and for how long.
type Load struct {
	Headline string   `json:"headline"`
	Lines    []string `json:"lines,omitempty"`
}

func (w speaker) load() Load {
	l := w.s.Loads
	v := Load{Headline: "No load is entered"}
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
		v.Lines = append(v.Lines, fmt.Sprintf("For %s, since %s, %s.", desk.Span(w.present().Sub(l.Since).Truncate(time.Second)), w.day(l.Since), how))
	}
	if !l.Ends.IsZero() {
		switch left := l.Ends.Sub(w.present()); {
		case left > 0 && w.s.Status.Closed:
			v.Lines = append(v.Lines, fmt.Sprintf("The plan would have held it for another %s.", desk.Span(left.Truncate(time.Minute))))
		case left > 0:
			v.Lines = append(v.Lines, fmt.Sprintf("The plan holds it for another %s, until %s.", desk.Span(left.Truncate(time.Minute)), w.day(l.Ends)))
		case w.s.Status.Closed:
			v.Lines = append(v.Lines, "Its planned time was over at "+w.day(l.Ends)+".")
		default:
			v.Lines = append(v.Lines, "Its planned time was over at "+w.day(l.Ends)+"; the recording goes on.")
		}
	}
	plan := w.d.Rig().Plan
	if next := l.Planned + 1; !w.s.Status.Closed && l.Planned >= 0 && next < len(plan) {
		v.Lines = append(v.Lines, "Next by the plan: "+plan[next].Step+setWords(plan[next])+".")
	}
	return v
}

// GaugeRow is one line of the table of gauges; what is not known is empty.
// Lengths are in mm.
type GaugeRow struct {
	Name string `json:"name"`
	// At is where the gauge stands, and what it sees where that is not the beam.
	At string `json:"at"`
	// Reading is the indication, Age how old it is.
	Reading string `json:"reading,omitempty"`
	Age     string `json:"age,omitempty"`
	// Sag is uncorrected, Net corrected by the analysis, Day the change of the
	// uncorrected sag in 24 h.
	Sag string `json:"sag_uncorrected,omitempty"`
	Net string `json:"sag_corrected,omitempty"`
	Day string `json:"day,omitempty"`
	// Left is the travel that is left, Until when it runs out.
	Left  string `json:"travel_left,omitempty"`
	Until string `json:"runs_out,omitempty"`
	Tone  Tone   `json:"tone"`
	// Status is what the gauge says of itself.
	Status string `json:"status,omitempty"`
}

func (w speaker) gauges() []GaugeRow {
	var out []GaugeRow
	for i, g := range w.s.Gauges {
		at := w.d.Rig().Gauges[i].At
		r := GaugeRow{Name: g.Name, At: at.Shown, Tone: Normal, Status: g.GaugeStatus}
		if g.Sees != "" && g.Sees != "beam" {
			r.At += ", sees a " + g.Sees
		}
		switch {
		case g.Seen && w.s.Status.Closed:
			r.Tone = Tone{Unknown.Class, "ended"}
		case g.Silent:
			r.Tone = Tone{Abnormal.Class, "silent"}
		case !g.Seen:
			r.Tone = Tone{Unknown.Class, "nothing yet"}
		default:
			r.Tone = Tone{Normal.Class, "answers"}
		}
		for _, a := range w.s.Alarms {
			if a.Subject == g.Name && (a.Cause == "frozen" || a.Cause == "travel") {
				r.Tone = Tone{ToneOf(a.Level).Class, a.Cause}
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
		if w.s.Status.Closed {
			r.Until = ""
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
