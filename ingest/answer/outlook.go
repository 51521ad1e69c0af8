package answer

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gaugelog/ingest/desk"
)

// Outlook is what the analysis foretells.
type Outlook struct {
	// State says what it knows, or why there is nothing.
	State     string     `json:"state"`
	Forecasts []Forecast `json:"forecasts,omitempty"`
	// Note says what the forecasts are of.
	Note    string   `json:"note,omitempty"`
	MayStop []string `json:"may_stop,omitempty"`
}

// Forecast is the sag (mm) at a time after full load; Label says how far it may
// be trusted, or why there is no figure.
type Forecast struct {
	After string `json:"after"`
	Date  string `json:"date"`
	Sag   string `json:"sag,omitempty"`
	Band  string `json:"band,omitempty"`
	Label string `json:"label,omitempty"`
}

var labelWords = map[string]string{
	"plain": "", "caution": "with caution: far beyond the data", "informative": "for information only: very far beyond the data", "refused": "refused",
}

func (w speaker) outlook() Outlook {
	o := w.s.Outlook
	if o == nil {
		v := Outlook{State: "The analysis has not answered yet."}
		if w.s.OutlookError != "" {
			v.State = "The analysis cannot answer: " + w.s.OutlookError
		}
		return v
	}
	v := Outlook{State: "By the analysis, from what was on disk at " + w.day(time.Unix(0, o.At)) + "."}
	if w.s.OutlookError != "" {
		v.State += " A later try failed: " + w.s.OutlookError
	}
	for _, f := range o.Forecasts {
		r := Forecast{After: f.After, Date: w.date(time.Unix(0, f.At)), Label: labelWords[f.Label]}
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
		switch {
		case m.More < 0:
			v.MayStop = append(v.MayStop, fmt.Sprintf("%s ago the farthest forecast was %s mm wide.", desk.Span(-m.More), desk.Fixed(m.WidthMM, 0.001)))
		case m.More == 0:
			v.MayStop = append(v.MayStop, fmt.Sprintf("Stop now: the farthest forecast is %s mm wide.", desk.Fixed(m.WidthMM, 0.001)))
		default:
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
