package live

import (
	"crypto/rand"
	"errors"
	"fmt"
	"net/http"
	"strconv"
	"strings"
	"sync"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
)

// longestText bounds what a person may type into one field, in characters.
const longestText = 500

// formView is what the forms offer.
type formView struct {
	Loads, Gauges, Acts []string
	LoadExample         string
}

func formsOf(d *desk.Desk, _ *desk.Snapshot) formView {
	v := formView{Acts: ingest.Acts, LoadExample: "12.40 kg"}
	for _, l := range d.Rig().Loads {
		v.Loads = append(v.Loads, l.Name)
	}
	for _, g := range d.Rig().Gauges {
		v.Gauges = append(v.Gauges, g.Name)
	}
	return v
}

// fieldNames are the fields a mark's form may have.
var fieldNames = []string{"kind", "step", "load", "value", "gauge", "act", "note", "when", "by", "id", "why"}

// confirmView asks once more.
type confirmView struct {
	Title, Path, Words, When string
	Fields                   []field
}

type field struct{ Name, Value string }

// ask shows what would be entered, and asks whether it is right. It changes
// nothing; it is a POST because its answer is about to.
func (s *Server) ask(w http.ResponseWriter, r *http.Request, p *page) {
	now := time.Now()
	m, err := markOf(p.desk, r.PostForm.Get, now)
	if err != nil {
		s.render(w, http.StatusUnprocessableEntity, "refusal", confirmView{Title: answer.TitleOf(p.desk), Path: p.path(), Words: err.Error()})
		return
	}
	v := confirmView{Title: answer.TitleOf(p.desk), Path: p.path()}
	if m.Withdraw != "" {
		v.Words = "Withdraw mark " + m.Withdraw + " (" + wordsOf(p.desk, m.Withdraw) + ")? It stays in the file but counts no more. Reason: " + m.Why
	} else {
		v.Words = answer.MarkWords(m)
		v.When = p.desk.Local(time.Unix(0, m.Time)).Format("Mon 2 Jan 2006, 15:04:05 MST")
	}
	for _, name := range fieldNames {
		if name != "when" {
			v.Fields = append(v.Fields, field{name, r.PostForm.Get(name)})
		}
	}
	// The instant is that of the press, not of the confirmation.
	v.Fields = append(v.Fields, field{"at", strconv.FormatInt(m.Time, 10)}, field{"once", rand.Text()})
	s.render(w, http.StatusOK, "confirm", v)
}

func wordsOf(d *desk.Desk, id string) string {
	for _, m := range d.Snapshot().Marks {
		if m.ID == id {
			return answer.MarkWords(m)
		}
	}
	return "not found"
}

// mark enters what was confirmed, once.
func (s *Server) mark(w http.ResponseWriter, r *http.Request, p *page) {
	at, err := strconv.ParseInt(r.PostForm.Get("at"), 10, 64)
	once := r.PostForm.Get("once")
	if err != nil || once == "" || len(once) > 64 {
		http.Error(w, "confirm the mark on the page first", http.StatusBadRequest)
		return
	}
	m, err := markOf(p.desk, func(name string) string {
		if name == "when" {
			return ""
		}
		return r.PostForm.Get(name)
	}, time.Unix(0, at))
	if err == nil && m.Withdraw == "" && time.Until(time.Unix(0, m.Time)) > time.Minute {
		err = errors.New("the time lies in the future")
	}
	if err != nil {
		s.render(w, http.StatusUnprocessableEntity, "refusal", confirmView{Title: answer.TitleOf(p.desk), Path: p.path(), Words: err.Error()})
		return
	}
	id, err := p.once.do(once, func() (string, error) { return p.desk.Mark(r.Context(), m) })
	if err != nil {
		s.o.Log.Error("a mark from the page was not entered", "error", err)
		s.render(w, http.StatusUnprocessableEntity, "refusal", confirmView{Title: answer.TitleOf(p.desk), Path: p.path(), Words: err.Error()})
		return
	}
	if m.Withdraw != "" {
		id = "withdrawn"
	}
	s.o.Log.Info("a mark was entered on the page", "rig", p.desk.Name(), "mark", id, "by", m.By)
	http.Redirect(w, r, p.path()+"?done="+id, http.StatusSeeOther)
}

// seen notes an alarm as seen.
func (s *Server) seen(w http.ResponseWriter, r *http.Request, p *page) {
	id, err := strconv.Atoi(r.PostForm.Get("alarm"))
	if err == nil {
		err = p.desk.See(r.Context(), id, clean(r.PostForm.Get("by")))
	}
	if err != nil {
		s.render(w, http.StatusUnprocessableEntity, "refusal", confirmView{Title: answer.TitleOf(p.desk), Path: p.path(), Words: err.Error()})
		return
	}
	http.Redirect(w, r, p.path()+"?done=seen", http.StatusSeeOther)
}

// onceOnly makes a form that was sent twice count once.
type onceOnly struct {
	mu   sync.Mutex
	done map[string]string
	last []string
}

// mostOnce bounds the confirmations remembered.
const mostOnce = 256

func newOnceOnly() *onceOnly { return &onceOnly{done: map[string]string{}} }

func (o *onceOnly) do(key string, f func() (string, error)) (string, error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	if id, done := o.done[key]; done {
		return id, nil
	}
	id, err := f()
	if err != nil {
		return "", err
	}
	o.done[key] = id
	if o.last = append(o.last, key); len(o.last) > mostOnce {
		delete(o.done, o.last[0])
		o.last = o.last[1:]
	}
	return id, nil
}

// markOf makes a mark of a form's fields; now is the instant of the press.
func markOf(d *desk.Desk, get func(string) string, now time.Time) (ingest.Mark, error) {
	rig := d.Rig()
	m := ingest.Mark{By: clean(get("by"))}
	at, err := parseWhen(get("when"), d.Local(now))
	if err != nil {
		return m, err
	}
	m.Time = at.UnixNano()
	switch get("kind") {
	case "step":
		for _, p := range rig.Plan {
			if p.Step != get("step") {
				continue
			}
			m.Step = p.Step
			for _, set := range p.Set {
				m.Loads = append(m.Loads, weigh(set.Load, set.Weight, d.Gravity()))
			}
			return m, nil
		}
		return m, fmt.Errorf("the plan has no step %q", get("step"))
	case "load":
		return loadMark(d, m, get("load"), get("value"))
	case "act":
		m.Gauge, m.Act = get("gauge"), get("act")
		for _, g := range rig.Gauges {
			if g.Name == m.Gauge {
				return m, checkAct(m.Act)
			}
		}
		return m, fmt.Errorf("the rig has no gauge %q", m.Gauge)
	case "note":
		if m.Note = clean(get("note")); m.Note == "" {
			return m, errors.New("the note is empty")
		}
		return m, nil
	case "withdraw":
		m.Withdraw, m.Why, m.Time = get("id"), clean(get("why")), now.UnixNano()
		return m, checkWithdraw(d, m)
	}
	return m, errors.New("the form says nothing that could be entered")
}

func loadMark(d *desk.Desk, m ingest.Mark, load, value string) (ingest.Mark, error) {
	weight, err := config.ParseWeight(value)
	if err != nil {
		return m, fmt.Errorf("the load's value: %w", err)
	}
	for _, l := range d.Rig().Loads {
		if l.Name == load {
			m.Loads = []ingest.LoadValue{weigh(load, weight, d.Gravity())}
			return m, nil
		}
	}
	return m, fmt.Errorf("the rig has no load %q", load)
}

func weigh(name string, w config.Weight, gravity float64) ingest.LoadValue {
	v := ingest.LoadValue{Name: name, Shown: w.Shown}
	if w.Mass != nil {
		kg := w.Mass.Value
		v.Kilogram, v.Newton = &kg, kg*gravity
	} else {
		v.Newton = w.Force.Value
	}
	return v
}

func checkAct(act string) error {
	for _, a := range ingest.Acts {
		if a == act {
			return nil
		}
	}
	return fmt.Errorf("there is no act %q; there are %s", act, strings.Join(ingest.Acts, ", "))
}

func checkWithdraw(d *desk.Desk, m ingest.Mark) error {
	if m.Why == "" {
		return errors.New("say why the mark does not count")
	}
	s := d.Snapshot()
	if _, gone := s.Withdrawn[m.Withdraw]; gone {
		return fmt.Errorf("mark %s is withdrawn already", m.Withdraw)
	}
	for _, mark := range s.Marks {
		if mark.ID == m.Withdraw && m.Withdraw != "" {
			return nil
		}
	}
	return fmt.Errorf("there is no mark %q", m.Withdraw)
}

// clean makes one line of what was typed, without control characters.
func clean(text string) string {
	text = strings.Map(func(r rune) rune {
		if r < 0x20 || r == 0x7f || r == 0x2028 || r == 0x2029 {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(text, ""))
	text = strings.TrimSpace(text)
	if r := []rune(text); len(r) > longestText {
		text = string(r[:longestText])
	}
	return text
}

// parseWhen reads when something was done: nothing for now, how long ago, or a
// time of today or of a date in the rig's zone.
func parseWhen(text string, now time.Time) (time.Time, error) {
	text = strings.TrimSpace(text)
	if text == "" {
		return now, nil
	}
	if d, err := config.ParseDuration(strings.TrimSpace(strings.TrimSuffix(text, "ago"))); err == nil && d.Value >= 0 && d.Value < 1e9 {
		return now.Add(-time.Duration(d.Value * float64(time.Second))), nil
	}
	for _, layout := range []string{"2006-01-02 15:04:05", "2006-01-02 15:04", "2006-01-02T15:04"} {
		if t, err := time.ParseInLocation(layout, text, now.Location()); err == nil {
			return notLater(t, now)
		}
	}
	for _, layout := range []string{"15:04:05", "15:04"} {
		if t, err := time.Parse(layout, text); err == nil {
			y, mo, day := now.Date()
			return notLater(time.Date(y, mo, day, t.Hour(), t.Minute(), t.Second(), 0, now.Location()), now)
		}
	}
	return now, fmt.Errorf("%q is no time; write how long ago it was, such as 3 min, or 07:05, or 2026-03-02 07:05", text)
}

func notLater(t, now time.Time) (time.Time, error) {
	if t.After(now.Add(time.Minute)) {
		return now, fmt.Errorf("%s lies in the future", t.Format("2006-01-02 15:04"))
	}
	return t, nil
}
