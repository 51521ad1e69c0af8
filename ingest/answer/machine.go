package answer

import (
	"fmt"
	"strings"
	"time"

	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/forward"
)

// AlarmRow is one alarm of the list. Seen and Over are empty until it was seen,
// and until it has ended.
type AlarmRow struct {
	ID     int    `json:"id"`
	Tone   Tone   `json:"tone"`
	Cause  string `json:"cause"`
	Text   string `json:"text"`
	Advice string `json:"advice"`
	Raised string `json:"raised"`
	Seen   string `json:"seen,omitempty"`
	Over   string `json:"over,omitempty"`
}

func (w speaker) alarm(a alarm.Alarm) AlarmRow {
	r := AlarmRow{ID: a.ID, Tone: ToneOf(a.Level), Cause: strings.ReplaceAll(a.Cause, "-", " "), Text: subject(a) + a.Text, Advice: a.Advice, Raised: w.day(a.Raised)}
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

// sending says how far the run is at the server it is sent to.
func (w speaker) sending(f *forward.State) Fact {
	switch {
	case f.Held:
		return Fact{"Sent to the server", "held: " + f.Words, Abnormal}
	case f.Words != "":
		return Fact{"Sent to the server", "the server is not there or busy; what waits is sent later", Tone{}}
	case f.Refused > 0:
		return Fact{"Sent to the server", count(f.Refused) + " lines refused and set aside", Abnormal}
	case f.Newest == 0 && f.Count.Held > 0:
		return Fact{"Sent to the server", count(f.Count.Held) + " readings wait until the machine's clock is set", Abnormal}
	case f.Newest == 0:
		return Fact{"Sent to the server", "nothing since this start", Tone{}}
	}
	return Fact{"Sent to the server", "up to " + w.day(time.Unix(0, f.Newest)), Normal}
}

func (w speaker) machine() []Fact {
	s := w.s.Status
	sync := Fact{"Last sync to disk", desk.Span(s.SyncAge) + " ago", Normal}
	switch {
	case s.Closed:
		sync.Tone = Tone{}
	case s.SyncAge > oldSync:
		sync.Tone = Abnormal
	}
	disk := Fact{"Disk", "free space not known", Unknown}
	if s.DiskFree >= 0 {
		disk.Value, disk.Tone = desk.Bytes(s.DiskFree)+" free", Normal
	}
	if w.raised("disk") {
		disk.Tone = Abnormal
	}
	if s.Fault != "" {
		disk.Value, disk.Tone = s.Fault, Abnormal
	}
	clock := Fact{"Clock", "kept by a time source", Normal}
	if !s.ClockSynchronised {
		clock.Value, clock.Tone = "not kept by a time source", Abnormal
	}
	stored := Fact{"Readings kept", fmt.Sprintf("%s since this start", count(s.Stored)), Normal}
	if w.s.Onlooking {
		stored = Fact{"Readings kept", "about " + count(w.readings()), Tone{}}
	}
	if s.Dropped > 0 {
		stored.Value += fmt.Sprintf(", %s lost for want of room", count(s.Dropped))
		stored.Tone = Abnormal
	}
	out := []Fact{sync, disk, clock, stored}
	if s.Closed {
		out = []Fact{sync, stored} // nobody is there whose disk and clock would matter
	}
	if s.Waiting > 0 {
		out = append(out, Fact{"Waiting for the disk", count(int64(s.Waiting)) + " readings", Normal})
	}
	if f := w.s.Forward; f != nil {
		out = append(out, w.sending(f))
	}
	if m := w.lastMark(); m != nil {
		out = append(out, Fact{"Last mark", MarkWords(*m) + ", " + w.day(time.Unix(0, m.Time)), Tone{}})
	}
	if w.s.Rebuilding {
		out = append(out, Fact{"Plots", "earlier readings are still being read", Unknown})
	}
	return out
}

// readings counts those in the bins of the gauges.
func (w speaker) readings() (n int64) {
	if w.s.Curves == nil {
		return 0
	}
	for i := range w.s.Curves.Series {
		if c := &w.s.Curves.Series[i]; c.Kind == desk.SagCurve {
			for k := range c.Whole {
				n += c.Whole[k].N
			}
		}
	}
	return n
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
