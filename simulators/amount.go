package simulators

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"gaugelog/config"

	"go.yaml.in/yaml/v3"
)

// The dimensions of a truth or fault file. Each is written with its unit, as
// in a rig file, and held in the unit its name gives.
type (
	// MM is a length in mm.
	MM float64
	// Seconds is a duration in s.
	Seconds float64
	// Newtons is a force in N.
	Newtons float64
	// MPa is a modulus.
	MPa float64
	// MMPerN is a compliance.
	MMPerN float64
	// NPerMM is a spring's stiffness.
	NPerMM float64
	// Celsius is a temperature, or a difference of two.
	Celsius float64
	// PerKelvin is a displacement per temperature in mm/K ("mm/K" or "um/K").
	PerKelvin float64
	// PerPercent is a displacement per relative humidity in mm/% ("mm/%", "um/%").
	PerPercent float64
	// PerDay is a drift in mm/d ("mm/d", "um/d").
	PerDay float64
	// Weight is a change of load: a mass in kg or a force in N.
	Weight struct {
		Kilogram, Newton float64
		Shown            string
	}
)

// scalar decodes one scalar of a truth file and puts its line before the error.
func scalar[T ~float64](out *T, node *yaml.Node, parse func(string) (float64, error)) error {
	if node.Kind != yaml.ScalarNode {
		return fmt.Errorf("line %d: a single value with its unit belongs here", node.Line)
	}
	v, err := parse(node.Value)
	if err != nil {
		return fmt.Errorf("line %d: %w", node.Line, err)
	}
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return fmt.Errorf("line %d: %q is not a finite number", node.Line, node.Value)
	}
	*out = T(v)
	return nil
}

// UnmarshalYAML reads a length such as "0.062 mm".
func (v *MM) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseLength(s); return q.Value, err })
}

// UnmarshalYAML reads a duration such as "35 s".
func (v *Seconds) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseDuration(s); return q.Value, err })
}

// UnmarshalYAML reads a force such as "0.6 N".
func (v *Newtons) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseForce(s); return q.Value, err })
}

// UnmarshalYAML reads a modulus such as "11800 MPa".
func (v *MPa) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseStress(s); return q.Value, err })
}

// UnmarshalYAML reads a compliance such as "0.00025 mm/N".
func (v *MMPerN) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseCompliance(s); return q.Value, err })
}

// UnmarshalYAML reads a stiffness such as "0.02 N/mm".
func (v *NPerMM) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseStiffness(s); return q.Value, err })
}

// UnmarshalYAML reads a temperature such as "20 C".
func (v *Celsius) UnmarshalYAML(n *yaml.Node) error {
	return scalar(v, n, func(s string) (float64, error) { q, err := config.ParseTemperature(s); return q.Value, err })
}

// UnmarshalYAML reads a coefficient such as "-2.5 um/K".
func (v *PerKelvin) UnmarshalYAML(n *yaml.Node) error { return scalar(v, n, per("/K")) }

// UnmarshalYAML reads a coefficient such as "0.3 um/%".
func (v *PerPercent) UnmarshalYAML(n *yaml.Node) error { return scalar(v, n, per("/%")) }

// UnmarshalYAML reads a drift such as "0.2 um/d".
func (v *PerDay) UnmarshalYAML(n *yaml.Node) error { return scalar(v, n, per("/d")) }

// UnmarshalYAML reads a weight such as "12.40 kg" or "98 N"; a minus before it
// takes load away.
func (v *Weight) UnmarshalYAML(n *yaml.Node) error {
	text, sign := strings.TrimSpace(n.Value), 1.0
	if rest, negative := strings.CutPrefix(text, "-"); negative {
		text, sign = rest, -1
	}
	w, err := config.ParseWeight(strings.TrimPrefix(text, "+"))
	if err != nil {
		return fmt.Errorf("line %d: %w", n.Line, err)
	}
	v.Shown = n.Value
	if w.Mass != nil {
		v.Kilogram = sign * w.Mass.Value
	} else {
		v.Newton = sign * w.Force.Value
	}
	return nil
}

// per reads a length divided by something: mm or um (a thousandth of it).
func per(behind string) func(string) (float64, error) {
	return func(text string) (float64, error) {
		number, found := strings.CutSuffix(strings.TrimSpace(text), behind)
		scale := 1.0
		if rest, ok := strings.CutSuffix(number, "um"); ok {
			number, scale = rest, 1e-3
		} else if rest, ok := strings.CutSuffix(number, "mm"); ok {
			number = rest
		} else {
			found = false
		}
		v, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
		if !found || err != nil {
			return 0, fmt.Errorf("%q: write a number and mm%s or um%s, such as -2.5 um%s", text, behind, behind, behind)
		}
		return v * scale, nil
	}
}
