package simulators

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"regexp"
	"slices"
	"strings"

	"go.yaml.in/yaml/v3"
)

// LoadTruth reads a truth file. An unknown key, a bare number for a dimension
// or a value out of its range is an error that names the file and the line.
func LoadTruth(path string) (*Truth, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("truth file: %w", err)
	}
	return ParseTruth(path, text)
}

// ParseTruth reads a truth file's text; name stands in its messages.
func ParseTruth(name string, text []byte) (*Truth, error) {
	t := &Truth{name: name}
	if err := strict(name, text, t); err != nil {
		return nil, err
	}
	if err := t.check(); err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	return t, nil
}

// LoadFaults reads a fault file, as strictly as LoadTruth.
func LoadFaults(path string) (*Faults, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("fault file: %w", err)
	}
	return ParseFaults(path, text)
}

// ParseFaults reads a fault file's text; name stands in its messages.
func ParseFaults(name string, text []byte) (*Faults, error) {
	f := &Faults{name: name}
	if err := strict(name, text, f); err != nil {
		return nil, err
	}
	for i, one := range f.Faults {
		if err := one.check(); err != nil {
			return nil, fmt.Errorf("%s: fault %d: %w", name, i+1, err)
		}
	}
	return f, nil
}

var unknownField = regexp.MustCompile(`^(line \d+: )?field (\S+) not found in type simulators\.(\S+)$`)

// strict decodes one YAML document and refuses what the type does not know.
func strict(name string, text []byte, out any) error {
	dec := yaml.NewDecoder(bytes.NewReader(text))
	dec.KnownFields(true)
	err := dec.Decode(out)
	if errors.Is(err, io.EOF) {
		return fmt.Errorf("%s: the file is empty", name)
	}
	if err != nil {
		return fmt.Errorf("%s: %s", name, plainYAML(err))
	}
	if err := dec.Decode(new(any)); !errors.Is(err, io.EOF) {
		return fmt.Errorf("%s: one document belongs in the file; a second one follows", name)
	}
	return nil
}

// plainYAML says a decoding error in the words of the file, not of Go.
func plainYAML(err error) string {
	var typed *yaml.TypeError
	if !errors.As(err, &typed) {
		return strings.TrimPrefix(err.Error(), "yaml: ")
	}
	var lines []string
	for _, line := range typed.Errors {
		if m := unknownField.FindStringSubmatch(line); m != nil {
			line = fmt.Sprintf("%sunknown key %q", m[1], m[2])
		}
		lines = append(lines, line)
	}
	return strings.Join(lines, "; ")
}

func (t *Truth) check() error {
	var errs []error
	bad := func(format string, args ...any) { errs = append(errs, fmt.Errorf(format, args...)) }
	if !(t.Specimen.Modulus > 0) {
		bad("specimen.modulus is missing: the truth needs the beam's real modulus, such as 11800 MPa")
	}
	if t.Specimen.ShearModulus < 0 {
		bad("specimen.shear_modulus must not be below 0")
	}
	if t.Gravity < 0 {
		bad("gravity must not be below 0")
	}
	if law, err := t.Creep.law(); err != nil {
		bad("creep: %w", err)
	} else if err := law.Check(); err != nil {
		bad("creep: %w", err)
	}
	if p := t.Place; p.Takes < 0 || p.Share < 0 || p.Share > 1 || (p.Share > 0 && (p.Hertz <= 0 || p.Decay <= 0)) {
		bad("placing: takes must not be below 0, ringing lies in 0..1 and needs hertz and decay above 0")
	}
	for _, p := range t.Pace {
		if !(p.Every > 0) {
			bad("pace: every must be above 0")
		}
	}
	for _, s := range t.Supports {
		if s.Compliance < 0 || s.Crushing < 0 {
			bad("support %q: compliance and crushing must not be below 0", s.Name)
		}
	}
	for _, g := range append(slices.Clone(t.Gauges), t.Every) {
		if g.Unit != "" && g.Unit != "mm" && g.Unit != "in" {
			bad("gauge %q: unit is mm or in, not %q", g.Name, g.Unit)
		}
		if g.Gain != nil && !(*g.Gain > 0) {
			bad("gauge %q: gain must be above 0", g.Name)
		}
		if (g.Stiffness != nil && *g.Stiffness < 0) || (g.Stiction != nil && *g.Stiction < 0) || (g.Noise != nil && *g.Noise < 0) {
			bad("gauge %q: stiffness, stiction and noise must not be below 0", g.Name)
		}
	}
	return errors.Join(errs...)
}

// statusWords are what a status may say, as in a rig file's frames.
var statusWords = []string{"hold", "battery-low", "over-range", "under-range", "high-limit", "low-limit", "error"}

func (f Fault) check() error {
	needs, known := faultNeeds[f.Kind]
	if !known {
		kinds := make([]string, 0, len(faultNeeds))
		for k := range faultNeeds {
			kinds = append(kinds, k)
		}
		slices.Sort(kinds)
		return fmt.Errorf("unknown kind %q; known are %s", f.Kind, strings.Join(kinds, ", "))
	}
	for _, need := range needs {
		missing := ""
		switch {
		case need == 'g' && f.Gauge == "":
			missing = "gauge"
		case need == 's' && f.Stand == "":
			missing = "stand"
		case need == 'p' && f.Gauge == "" && f.Port == "":
			missing = "gauge or port"
		case need == 'l' && f.Load == "":
			missing = "load"
		case need == 'u' && f.Support == "":
			missing = "support"
		case need == 'f' && !(f.For > 0):
			missing = "for (above 0)"
		case need == 'z' && f.Size == 0:
			missing = "size"
		case need == 'b' && f.By == Weight{}:
			missing = "by"
		case need == 'd' && !(f.Delay > 0):
			missing = "delay (above 0)"
		case need == 'i' && f.Limit == nil:
			missing = "limit"
		case need == 'w' && !slices.Contains(statusWords, f.Status):
			missing = "status: " + strings.Join(statusWords, ", ")
		}
		if missing != "" {
			return fmt.Errorf("a %s needs %s", f.Kind, missing)
		}
	}
	if f.Every < 0 || f.Every > 0 && !(f.For > 0) {
		return fmt.Errorf("every must be above 0 and needs for")
	}
	if f.Share != nil && !(*f.Share >= 0 && *f.Share <= 1) {
		return fmt.Errorf("share lies in 0..1, not %g", *f.Share)
	}
	if f.For < 0 || f.At < 0 && f.After == "" {
		return fmt.Errorf("a fault cannot begin before the start or last less than nothing")
	}
	return nil
}
