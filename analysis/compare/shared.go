package compare

import (
	"fmt"
	"slices"
	"strings"

	"gaugelog/analysis"
	"gaugelog/config"
)

// cause is one input of a modulus that another run may share.
type cause struct {
	name string
	// key is equal where the error behind it is the same one.
	key string
	// relative is sensitivity times u over the modulus, with its sign.
	relative float64
}

// causesOf lists the inputs of a run's modulus whose errors another run can
// share: gravity of one place, a gauge with one calibration, the masses called
// the same and stated alike, a lever, and the section of one specimen.
func causesOf(s Subject) []cause {
	var out []cause
	m := s.Result.Stiffness.Modulus
	if m == nil || m.Value == 0 {
		return nil
	}
	for _, l := range s.Result.Stiffness.Budget {
		if key := keyOf(s, l); key != "" {
			out = append(out, cause{l.Input, key, l.Sensitivity * l.UInput.Value / m.Value})
		}
	}
	return out
}

// keyOf is what makes an input's error the same in another run; "" where
// nothing does.
func keyOf(s Subject, l analysis.BudgetLine) string {
	switch {
	case l.Input == "gravity":
		g := s.Rig.Gravity
		return fmt.Sprint("gravity ", number(g.Value), " ", number(g.Latitude), " ", length(g.Height))
	case strings.HasPrefix(l.Input, "gain of gauge "):
		return gaugeKey(s.Rig, strings.TrimPrefix(l.Input, "gain of gauge "))
	case strings.HasPrefix(l.Input, "weight of load "):
		name := strings.TrimPrefix(l.Input, "weight of load ")
		return "weight " + name + " " + masses(s, name)
	case strings.HasPrefix(l.Input, "lever of load "):
		name := strings.TrimPrefix(l.Input, "lever of load ")
		for _, o := range s.Rig.Loads {
			if o.Name == name && o.Lever != nil {
				return "lever " + name + " " + number(o.Lever)
			}
		}
	case ofSection(l.Input):
		return "section " + s.Rig.Specimen.Name + " " + l.Input + " " + sectionWords(s.Rig.Specimen.Section)
	}
	return ""
}

// ofSection tells whether an input is a dimension of the cross-section.
func ofSection(input string) bool {
	name, _, _ := strings.Cut(input, ",")
	return slices.Contains([]string{"width", "depth", "diameter", "wall", "second moment"}, name)
}

// gaugeKey is a gauge's identity with its calibration; "" where it has none.
func gaugeKey(rig *config.Rig, name string) string {
	for _, g := range rig.Gauges {
		if c := g.Calibration; g.Name == name && c != nil {
			who := "named " + g.Name
			if g.SerialNumber != "" {
				who = "number " + g.SerialNumber
			}
			return fmt.Sprintf("gain %s %v %v %v %s", who, c.Offset.Value, c.Gain.Value, number(c.UGain), c.Date)
		}
	}
	return ""
}

// masses lists what a load was set to in a run, each once.
func masses(s Subject, load string) string {
	var list []float64
	for _, step := range s.Result.Steps {
		if kg := step.Kilogram[load]; kg != 0 && !slices.Contains(list, kg) {
			list = append(list, kg)
		}
	}
	slices.Sort(list)
	return fmt.Sprint(list)
}

func sectionWords(c config.Section) string {
	var s strings.Builder
	s.WriteString(c.Shape)
	for _, list := range [][]config.Length{c.Width, c.Depth, c.Diameter, c.Wall} {
		for _, l := range list {
			fmt.Fprint(&s, " ", l.Value)
		}
		s.WriteByte(';')
	}
	if c.SecondMoment != nil {
		fmt.Fprint(&s, c.SecondMoment.Value)
	}
	return s.String()
}

func number(n *config.Number) string {
	if n == nil {
		return "-"
	}
	return fmt.Sprint(n.Value)
}

func length(l *config.Length) string {
	if l == nil {
		return "-"
	}
	return fmt.Sprint(l.Value)
}
