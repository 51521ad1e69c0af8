package answer

import (
	"time"

	"gaugelog/ingest/alarm"
	"gaugelog/ingest/desk"
)

// Tone is the class of a coloured mark with its word: the meanings of IEC
// 60073's colours, or none where nothing is known. The word always stands
// beside the colour.
type Tone struct {
	// Class is normal (green), abnormal (yellow), danger (red), unknown (no
	// colour) or empty where there is nothing to judge.
	Class string `json:"class"`
	Word  string `json:"word"`
}

// The tones.
var (
	Normal   = Tone{"normal", "normal"}
	Abnormal = Tone{"abnormal", "abnormal"}
	Danger   = Tone{"danger", "danger"}
	Unknown  = Tone{"unknown", "not known"}
)

// ToneOf is the tone of an alarm's level.
func ToneOf(l alarm.Level) Tone {
	return [...]Tone{alarm.Normal: Normal, alarm.Abnormal: Abnormal, alarm.Danger: Danger}[l]
}

// Answer is what there is to say to one question: in short, and the lines that
// say more.
type Answer struct {
	Tone  Tone     `json:"tone"`
	Short string   `json:"short"`
	More  []string `json:"more,omitempty"`
}

// View is everything there is to show of a run at one moment, in words. It is
// what crosses to the page's templates and, as JSON, to a terminal elsewhere.
type View struct {
	Title    string    `json:"title"`
	Specimen string    `json:"specimen"`
	At       string    `json:"at"` // in the rig's zone
	Instant  time.Time `json:"instant"`
	// Whole is false while earlier readings are still being read, or the
	// analysis has not answered yet.
	Whole bool `json:"whole"`
	// Banner speaks of the alarms.
	Banner Answer `json:"banner"`
	// The five questions that people ask at a rig.
	Alive     Answer     `json:"alive"`
	Knocked   Answer     `json:"knocked"`
	Travel    Answer     `json:"travel"`
	Yesterday Answer     `json:"yesterday"`
	Speed     Answer     `json:"speed"`
	Load      Load       `json:"load"`
	Gauges    []GaugeRow `json:"gauges"`
	// Lead is the gauge that the answers speak of; empty where there is none.
	Lead      string   `json:"lead,omitempty"`
	Corrected string   `json:"corrected,omitempty"`
	Outlook   Outlook  `json:"outlook"`
	Room      []string `json:"room,omitempty"`
	// Alarms are raised, Past have ended within the last week.
	Alarms  []AlarmRow `json:"alarms,omitempty"`
	Past    []AlarmRow `json:"past,omitempty"`
	Machine []Fact     `json:"machine"`
	Steps   []Step     `json:"steps,omitempty"`
	Marks   []MarkRow  `json:"marks,omitempty"`
}

// Question is one of the five, with its answer.
type Question struct {
	// Name is a short name for lists, such as alive; Brief is the question in
	// a word or two.
	Name, Text, Brief string
	Answer            Answer
}

// Questions lists the five questions in their order.
func (v *View) Questions() []Question {
	return []Question{
		{"alive", "Is it alive?", "Alive?", v.Alive},
		{"knocked", "Was it knocked overnight?", "Knocked?", v.Knocked},
		{"travel", "How much travel is left?", "Travel left?", v.Travel},
		{"yesterday", "What changed since yesterday?", "Since yesterday?", v.Yesterday},
		{"speed", "Is it speeding up?", "Speeding up?", v.Speed},
	}
}

// Fact is a name with a value.
type Fact struct {
	Name  string `json:"name"`
	Value string `json:"value"`
	Tone  Tone   `json:"tone"`
}

// speaker words one snapshot.
type speaker struct {
	d *desk.Desk
	s *desk.Snapshot
}

// Of words a snapshot of a desk.
func Of(d *desk.Desk, s *desk.Snapshot) View {
	w := speaker{d, s}
	v := View{
		Title: TitleOf(d), Specimen: d.Rig().Specimen.Name, At: w.clock(s.At), Instant: s.At, Whole: s.Whole,
		Banner: w.banner(), Alive: w.alive(), Knocked: w.knocked(), Travel: w.travel(), Yesterday: w.yesterday(), Speed: w.speed(),
		Load: w.load(), Gauges: w.gauges(), Corrected: w.corrected(), Outlook: w.outlook(), Room: w.room(),
		Machine: w.machine(), Steps: w.steps(), Marks: w.marks(),
	}
	if g := w.lead(); g != nil {
		v.Lead = g.Name
	}
	for _, a := range s.Alarms {
		v.Alarms = append(v.Alarms, w.alarm(a))
	}
	for _, a := range s.PastAlarms {
		if s.At.Sub(a.Over) < pastFor {
			v.Past = append(v.Past, w.alarm(a))
		}
	}
	return v
}

// pastFor is how long an ended alarm is listed.
const pastFor = 7 * 24 * time.Hour

// TitleOf is the rig's title, or its specimen's name where it has none.
func TitleOf(d *desk.Desk) string {
	if t := d.Rig().Title; t != "" {
		return t
	}
	return d.Rig().Specimen.Name
}

// Brief is a run's alarms and whether it is alive, for a list of runs.
func Brief(d *desk.Desk) (banner, alive Answer) {
	w := speaker{d, d.Snapshot()}
	return w.banner(), w.alive()
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
