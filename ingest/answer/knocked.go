package answer

import (
	"fmt"
	"strings"
	"time"

	"gaugelog/ingest/desk"
)

// knockWords words the kinds of disturbance that the second question is about.
var knockWords = map[string]string{
	"bench-knock": "the bench was knocked", "gauge-knock": "a gauge was knocked", "zero-pressed": "a zero was pressed",
	"support-shift": "a support moved", "load-change": "the load changed without a mark", "unit-key": "the unit was changed",
	"undecided": "something moved a gauge",
}

func (w speaker) knocked() Answer {
	from := "since yesterday " + w.d.Local(w.s.At).Format("15:04")
	if w.s.Status.Closed {
		from = "in the last day of the recording"
	} else if t, known := w.began(); known && w.present().Sub(t) < 24*time.Hour {
		from = "since the recording began"
	}
	o := w.s.Outlook
	if o == nil {
		a := Answer{Unknown, "Not looked at yet", []string{"The analysis beside the recording has not answered."}}
		if w.s.OutlookError != "" {
			a.More = []string{"The analysis says: " + w.s.OutlookError}
		}
		return a
	}
	var found []string
	for _, b := range o.Disturbances {
		words, listed := knockWords[b.Kind]
		at := time.Unix(0, b.From)
		if !listed || w.present().Sub(at) > 24*time.Hour {
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
		return Answer{Normal, "No: nothing found " + from, []string{"Looked at up to " + w.day(time.Unix(0, o.At)) + "."}}
	}
	if len(found) > 6 {
		found = append(found[len(found)-6:], fmt.Sprintf("and %d before", len(found)-6))
	}
	return Answer{Abnormal, fmt.Sprintf("Yes: %d %s %s", len(found), plural(len(found), "disturbance"), from), found}
}

func plural(n int, word string) string {
	if n == 1 {
		return word
	}
	return word + "s"
}

// began is the instant of the first reading in the bins; false while earlier ones
// are still being read.
func (w speaker) began() (t time.Time, known bool) {
	if w.s.Curves == nil || w.s.Rebuilding {
		return t, false
	}
	for i := range w.s.Curves.Series {
		if bins := w.s.Curves.Series[i].Whole; len(bins) > 0 {
			if at := time.Unix(0, bins[0].FirstTime); !known || at.Before(t) {
				t, known = at, true
			}
		}
	}
	return t, known
}
