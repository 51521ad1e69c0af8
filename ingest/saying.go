package ingest

import "time"

// sayingApart bounds how often a gauge's status is an event: one whose value
// stands at a limit of its tolerance flickers with every reading.
const sayingApart = int64(time.Minute)

// saying is what a gauge says of itself beside its number: hold, battery-low,
// a limit passed. It stands with every reading; a change of it is an event.
type saying struct {
	told, now string
	toldAt    int64 // boot-time instant; 0: never
}

// says notes the status of a reading.
func (r *Recorder) says(c *channel, status string) {
	c.saying.now = status
	r.tellSaying(c)
}

// tellSayings notes the changes that came too soon after the one before.
func (r *Recorder) tellSayings() {
	for _, c := range r.channels {
		r.tellSaying(c)
	}
}

func (r *Recorder) tellSaying(c *channel) {
	s := &c.saying
	if s.now == s.told || s.toldAt != 0 && r.now-s.toldAt < sayingApart {
		return
	}
	detail := "the gauge says " + s.now
	if s.now == "" {
		detail = "the gauge no longer says " + s.told
	}
	r.happened(Happening{Kind: StatusChanged, Gauge: c.name, Detail: detail})
	s.told, s.toldAt = s.now, r.now
}
