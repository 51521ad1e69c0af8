package ingest

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// Mark is an operator's dated entry. At least one of Loads, Step, Note, Act
// and Withdraw is given; Step may stand with Loads, and then names the step
// that the loads begin.
type Mark struct {
	// ID is m1, m2 and so on within a run. AppendMark chooses it; a
	// withdrawal has none of its own.
	ID string
	// Time is when what it speaks of happened, in nanoseconds since 1970 UTC;
	// 0 in AppendMark means now.
	Time int64
	// By names who entered it; may be empty.
	By string
	// Loads are the values that loads have from Time on.
	Loads []LoadValue
	// Step names the step that begins at Time.
	Step string
	// Note is free text.
	Note string
	// Photo is the path of a picture within the run folder, such as
	// photos/m7.jpg; it needs a Note.
	Photo string
	// Gauge and Act tell of something done to a gauge. Act is one of zeroed,
	// moved, replaced, lifted, set-down.
	Gauge, Act string
	// Withdraw is the id of an earlier mark that does not count; Why says why.
	Withdraw, Why string
}

// LoadValue is what one load weighs from a mark on.
type LoadValue struct {
	Name string
	// Kilogram is the mass, or nil where a force was stated.
	Kilogram *float64
	// Newton is the force: the one stated, or mass times the rig's gravity as
	// a convenience to other readers of the file.
	Newton float64
	// Shown is the value as it was typed.
	Shown string
}

// Acts are what can be done to a gauge.
var Acts = []string{"zeroed", "moved", "replaced", "lifted", "set-down"}

func (m *Mark) check() error {
	if m.Withdraw != "" {
		if len(m.Loads) > 0 || m.Step != "" || m.Note != "" || m.Act != "" {
			return errors.New("a withdrawal stands alone: enter the corrected mark as a second one")
		}
		if m.Why == "" {
			return errors.New("a withdrawal says why")
		}
		return nil
	}
	if len(m.Loads) == 0 && m.Step == "" && m.Note == "" && m.Act == "" {
		return errors.New("the mark says nothing: give a load, a step, an act or a note")
	}
	if m.Photo != "" && m.Note == "" {
		return errors.New("a photo goes with a note that says what it shows")
	}
	if (m.Gauge == "") != (m.Act == "") {
		return errors.New("an act needs its gauge, and a gauge its act")
	}
	if m.Act != "" && !isAct(m.Act) {
		return fmt.Errorf("act %q is none of %s", m.Act, strings.Join(Acts, ", "))
	}
	return m.checkLoads()
}

func (m *Mark) checkLoads() error {
	seen := map[string]bool{}
	for _, l := range m.Loads {
		switch {
		case l.Name == "":
			return errors.New("a load without a name")
		case seen[l.Name]:
			return fmt.Errorf("load %s is given twice in one mark", l.Name)
		case notNumber(l.Newton) || l.Kilogram != nil && notNumber(*l.Kilogram):
			return fmt.Errorf("load %s: its value is no number", l.Name)
		}
		seen[l.Name] = true
	}
	return nil
}

func isAct(act string) bool {
	for _, a := range Acts {
		if a == act {
			return true
		}
	}
	return false
}

// numberOf is the number in a mark's id, 0 for any other text.
func numberOf(id string) int {
	n := 0
	if len(id) < 2 || id[0] != 'm' {
		return 0
	}
	for _, d := range id[1:] {
		if d < '0' || d > '9' || n > math.MaxInt32 {
			return 0
		}
		n = n*10 + int(d-'0')
	}
	return n
}
