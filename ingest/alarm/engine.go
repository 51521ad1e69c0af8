package alarm

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
	"time"

	"gaugelog/ingest"
)

// messageEvery is how long the same cause at the same subject stays without a
// second message.
const messageEvery = 24 * time.Hour

// Wish is what a fact asks for.
type Wish uint8

// The wishes.
const (
	Leave Wish = iota // between the thresholds: let things stay as they are
	Raise
	Over
)

// Fact is what is seen of one cause at one subject.
type Fact struct {
	Cause   string // of config.AlarmCauses
	Subject string // gauge or probe; empty: the run
	Wish    Wish
	Text    string // what is seen, in words, with figures and units
}

// Alarm is one alarm from its raising on.
type Alarm struct {
	// ID names it within the run: no two alarms have had the same.
	ID      int    `json:"id"`
	Cause   string `json:"cause"`
	Subject string `json:"gauge,omitempty"`
	Level   Level  `json:"level"`
	// Text is what was seen last; Advice what to do.
	Text   string    `json:"text"`
	Advice string    `json:"advice"`
	Raised time.Time `json:"raised"`
	// Seen and Over are zero until someone confirms to have seen it, and
	// until it has ended.
	Seen   time.Time `json:"seen,omitzero"`
	SeenBy string    `json:"seen_by,omitempty"`
	Over   time.Time `json:"over,omitzero"`
}

// Step is what one call of the engine brought about.
type Step struct {
	// Happened is for events.lp.
	Happened []ingest.Happening
	// Message holds what was newly raised and was not told within a day;
	// empty: there is nothing to tell.
	Message []Alarm
}

// Engine holds the alarms of one run. It is for one goroutine.
type Engine struct {
	wanted func(cause string) bool
	states map[string]*state
	past   []Alarm
	nextID int
}

// mostPast bounds the ended alarms remembered for the page.
const mostPast = 50

type state struct {
	alarm      *Alarm
	asked, let time.Time // since when facts ask for it, or let it go
	told       time.Time // when the last message went out
	left       *Alarm    // of an earlier recorder, not over as far as is known
	visited    bool
}

// NewEngine makes an engine that raises the wanted causes only.
func NewEngine(wanted func(cause string) bool) *Engine {
	return &Engine{wanted: wanted, states: map[string]*state{}, nextID: 1}
}

func key(cause, subject string) string { return cause + "\x00" + subject }

func (e *Engine) state(cause, subject string) *state {
	k := key(cause, subject)
	s := e.states[k]
	if s == nil {
		s = &state{}
		e.states[k] = s
	}
	return s
}

// Step takes the facts of one moment. An alarm for which no fact is given any
// more is let go.
func (e *Engine) Step(now time.Time, facts []Fact) Step {
	var out Step
	for _, s := range e.states {
		s.visited = false
	}
	for _, f := range facts {
		r, known := rules[f.Cause]
		if !known {
			panic("alarm: no rule for cause " + f.Cause)
		}
		if !e.wanted(f.Cause) {
			continue
		}
		s := e.state(f.Cause, f.Subject)
		s.visited = true
		e.step(s, r, f, now, &out)
	}
	for k, s := range e.states {
		if s.visited || s.alarm == nil && s.left == nil {
			continue
		}
		cause, subject, _ := strings.Cut(k, "\x00")
		e.step(s, rules[cause], Fact{Cause: cause, Subject: subject, Wish: Over}, now, &out)
	}
	slices.SortFunc(out.Message, bySeverity)
	slices.SortFunc(out.Happened, func(a, b ingest.Happening) int {
		return cmp.Or(cmp.Compare(a.Kind, b.Kind), cmp.Compare(a.Detail, b.Detail), cmp.Compare(a.Gauge, b.Gauge))
	})
	return out
}

func (e *Engine) step(s *state, r rule, f Fact, now time.Time, out *Step) {
	switch f.Wish {
	case Raise:
		s.let = time.Time{}
		if s.asked.IsZero() {
			s.asked = now
		}
		if s.alarm != nil {
			s.alarm.Text = f.Text
		} else if now.Sub(s.asked) >= r.raise {
			e.raise(s, r, f, now, out)
		}
	case Over:
		s.asked = time.Time{}
		if s.let.IsZero() {
			s.let = now
		}
		if now.Sub(s.let) >= r.over {
			e.end(s, now, out)
		}
	case Leave:
		s.asked, s.let = time.Time{}, time.Time{}
	}
}

func (e *Engine) raise(s *state, r rule, f Fact, now time.Time, out *Step) {
	s.alarm = &Alarm{Cause: f.Cause, Subject: f.Subject, Level: r.level, Advice: r.advice, Raised: now}
	if s.left != nil {
		s.alarm, s.left = s.left, nil
	}
	s.alarm.ID, s.alarm.Text = e.nextID, f.Text
	e.nextID++
	out.Happened = append(out.Happened, happening(ingest.AlarmRaised, s.alarm))
	if s.told.IsZero() || now.Sub(s.told) >= messageEvery {
		s.told = now
		out.Message = append(out.Message, *s.alarm)
	}
}

// end lets an alarm go, or one that an earlier recorder left and that is no more.
func (e *Engine) end(s *state, now time.Time, out *Step) {
	a := s.alarm
	if a == nil {
		a = s.left
	}
	if a == nil {
		return
	}
	a.Over = now
	out.Happened = append(out.Happened, happening(ingest.AlarmOver, a))
	e.past = append(e.past, *a)
	if len(e.past) > mostPast {
		e.past = slices.Clone(e.past[1:])
	}
	s.alarm, s.left = nil, nil
}

func happening(kind string, a *Alarm) ingest.Happening {
	return ingest.Happening{Kind: kind, Gauge: a.Subject, Detail: a.Cause + ": " + a.Text}
}

// See notes that a person has seen an alarm. It fails for an id that is not
// raised; seeing an alarm twice changes nothing.
func (e *Engine) See(id int, by string, now time.Time) (ingest.Happening, bool, error) {
	for _, s := range e.states {
		if s.alarm == nil || s.alarm.ID != id {
			continue
		}
		if !s.alarm.Seen.IsZero() {
			return ingest.Happening{}, false, nil
		}
		s.alarm.Seen, s.alarm.SeenBy = now, by
		h := happening(ingest.AlarmSeen, s.alarm)
		if by != "" {
			h.Detail += seenBy + by + ")"
		}
		return h, true, nil
	}
	return ingest.Happening{}, false, fmt.Errorf("there is no alarm %d any more", id)
}

// Current lists the raised alarms, gravest first, then newest first.
func (e *Engine) Current() []Alarm {
	var out []Alarm
	for _, s := range e.states {
		if s.alarm != nil {
			out = append(out, *s.alarm)
		}
	}
	slices.SortFunc(out, bySeverity)
	return out
}

// Past lists ended alarms, the newest first, at most fifty.
func (e *Engine) Past() []Alarm {
	out := slices.Clone(e.past)
	slices.Reverse(out)
	return out
}

func bySeverity(a, b Alarm) int {
	return cmp.Or(cmp.Compare(b.Level, a.Level), b.Raised.Compare(a.Raised), cmp.Compare(a.ID, b.ID))
}
