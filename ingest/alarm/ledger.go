package alarm

import (
	"maps"
	"slices"
	"strings"
	"time"

	"gaugelog/ingest"
)

// Ledger follows a run's events to the alarms they tell of, over all the
// recorders that wrote them. A recorder begins without alarms and raises anew
// what is still so: an alarm that was not over goes on then, with the instant it
// was first raised and with who has seen it. The zero value is an empty ledger;
// it is for one goroutine.
type Ledger struct {
	raised, ended []Alarm
	left          []Alarm // by a recorder that ended; neither over nor raised anew
	told          map[string]time.Time
	count         int // of raisings
}

// Raised lists the alarms that the newest recorder has raised and that are not
// over, in the order of their raising. Their IDs are zero.
func (l *Ledger) Raised() []Alarm { return l.raised }

// Ended lists the alarms that are over, the oldest first, at most fifty.
func (l *Ledger) Ended() []Alarm { return l.ended }

// seenBy stands in an event's detail before the name of who has seen an alarm.
const seenBy = " (seen by "

// Take follows one event: its kind, the gauge or probe it names, its detail and
// its instant. Kinds that tell of no alarm, causes that are not known and details
// without a cause change nothing.
func (l *Ledger) Take(kind, subject, detail string, at time.Time) {
	if kind == ingest.Started {
		l.left, l.raised = append(l.left, l.raised...), nil
		return
	}
	cause, text, ok := strings.Cut(detail, ":")
	text = strings.TrimPrefix(text, " ")
	if _, known := rules[cause]; !ok || !known {
		return
	}
	switch kind {
	case ingest.AlarmRaised:
		l.raise(cause, subject, text, at)
	case ingest.AlarmSeen:
		if a := find(l.raised, cause, subject); a != nil {
			a.Seen, a.SeenBy = at, ""
			if i := strings.LastIndex(text, seenBy); i >= 0 {
				a.SeenBy = strings.TrimSuffix(text[i+len(seenBy):], ")")
			}
		}
	case ingest.AlarmOver:
		l.end(&l.raised, cause, subject, at)
		l.end(&l.left, cause, subject, at)
	}
}

func (l *Ledger) raise(cause, subject, text string, at time.Time) {
	l.count++
	if l.told == nil {
		l.told = map[string]time.Time{}
	}
	l.told[key(cause, subject)] = at
	if find(l.raised, cause, subject) != nil {
		return
	}
	a := Alarm{Cause: cause, Subject: subject, Level: LevelOf(cause), Advice: Advice(cause), Raised: at}
	if was := find(l.left, cause, subject); was != nil {
		a = *was
		l.left = without(l.left, cause, subject)
	}
	a.Text = text
	l.raised = append(l.raised, a)
}

func (l *Ledger) end(from *[]Alarm, cause, subject string, at time.Time) {
	a := find(*from, cause, subject)
	if a == nil {
		return
	}
	over := *a
	over.Over = at
	*from = without(*from, cause, subject)
	if l.ended = append(l.ended, over); len(l.ended) > mostPast {
		l.ended = l.ended[1:]
	}
}

func find(all []Alarm, cause, subject string) *Alarm {
	for i := range all {
		if all[i].Cause == cause && all[i].Subject == subject {
			return &all[i]
		}
	}
	return nil
}

func without(all []Alarm, cause, subject string) []Alarm {
	return slices.DeleteFunc(all, func(a Alarm) bool { return a.Cause == cause && a.Subject == subject })
}

// Restore hands an engine that has not stepped yet what earlier recorders of the
// run raised: so that no cause is told twice within a day, no ID names two
// alarms of a run, an alarm that is still so goes on as what it was, and one that
// is not is over. What has ended stands among the past.
func (e *Engine) Restore(l *Ledger) {
	e.nextID = l.count + 1
	e.past = slices.Clone(l.ended)
	for k, at := range l.told {
		cause, subject, _ := strings.Cut(k, "\x00")
		e.state(cause, subject).told = at
	}
	for _, a := range slices.Concat(l.left, l.raised) {
		if e.wanted(a.Cause) {
			e.state(a.Cause, a.Subject).left = &a
		}
	}
}

// Waiting gives facts that let the alarms of earlier recorders be, for causes
// that nothing can be said of yet. The engine holds them for over otherwise.
func (e *Engine) Waiting(causes ...string) []Fact {
	var out []Fact
	for _, k := range slices.Sorted(maps.Keys(e.states)) {
		cause, subject, _ := strings.Cut(k, "\x00")
		if e.states[k].left != nil && slices.Contains(causes, cause) {
			out = append(out, Fact{Cause: cause, Subject: subject, Wish: Leave})
		}
	}
	return out
}
