package main

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// notANumber finds a figure that is none, in texts, tables and plots.
var notANumber = regexp.MustCompile(`\bNaN\b|[+-]?\bInf\b|\+Inf|null,"unit"`)

// A rig that cannot be worked out gets one plain message with the mend from
// check and from analyse, and no output holds a figure that is no number.
func TestBadLayouts(t *testing.T) {
	for _, c := range []struct {
		name, old, new string
		want           string // in what is said
		analyses       bool   // analyse gives what it can, and a warning says what it cannot
	}{
		{name: "zero depth", old: "depth: 40 mm", new: "depth: 0 mm", want: "depth"},
		{name: "zero width", old: "width: 100 mm", new: "width: 0 mm", want: "width"},
		{name: "no depth", old: ", depth: 40 mm", new: "", want: "depth"},
		{name: "span of zero", old: "{name: right, at: 600 mm}", new: "{name: right, at: 0 mm}", want: "stand at one place"},
		{name: "no length", old: "length: 800 mm", new: "length: 0 mm", want: "length"},
		{name: "load off the beam", old: "{name: pan, at: 300 mm}", new: "{name: pan, at: 900 mm}", want: "pan"},
		{name: "load backwards", old: "{name: pan, at: 300 mm}", new: "{name: pan, from: 400 mm, to: 200 mm}", want: "pan"},
		{name: "one pin", old: ", {name: right, at: 600 mm}", new: "", want: "support"},
		{name: "wall thicker than the box", old: "shape: rectangle, width: 100 mm, depth: 40 mm", new: "shape: box, width: 100 mm, depth: 40 mm, wall: 25 mm", want: "wall"},
		{name: "wall thicker than the tube", old: "shape: rectangle, width: 100 mm, depth: 40 mm", new: "shape: tube, diameter: 40 mm, wall: 25 mm", want: "wall"},
		{name: "bar on one place", old: "at: 300 mm, sense", new: "at: 300 mm, bar: [200 mm, 200 mm], sense", want: "bar"},
		{name: "support off the beam", old: "{name: left, at: 0 mm}", new: "{name: left, at: -500 mm}", want: "left"},
		{name: "gauge over a support alone", old: "{name: mid, at: 300 mm", new: "{name: mid, at: 0 mm", want: "", analyses: true},
		{name: "loads over the supports", old: "{name: pan, at: 300 mm}", new: "{name: pan, at: 600 mm}", want: "", analyses: true},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := foreignRun(t, t.TempDir(), "board", 600, 10)
			file := filepath.Join(dir, "rig.yaml")
			rig, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			text := strings.Replace(string(rig), c.old, c.new, 1)
			if text == string(rig) {
				t.Fatalf("%q is not in the rig", c.old)
			}
			text = strings.Replace(text, "read:", "plan: [{step: zero, hold: 10 min}, {step: l1, set: {pan: 10 kg}, hold: 1 h}]\nread:", 1)
			text = strings.Replace(text, "material: timber", "material: timber, expect: {modulus: 11500 MPa}", 1)
			if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
				t.Fatal(err)
			}
			for _, args := range [][]string{{"check", file}, {"check", file, "--json"}, {"analyse", dir}, {"analyse", dir, "--json"}} {
				code, out, errOut := gaugelog(args...)
				if bad := notANumber.FindString(out + errOut); bad != "" {
					t.Errorf("%v: a figure is %s:\n%s", args, bad, out)
				}
				if c.analyses {
					if args[0] == "analyse" && code != Done {
						t.Errorf("%v ended with %d: %s", args, code, errOut)
					}
					if args[0] == "analyse" && !strings.Contains(out, "no stiffness") {
						t.Errorf("%v: no word of the missing stiffness", args)
					}
					continue
				}
				if args[0] == "check" && len(args) == 3 && code != Wrong {
					t.Errorf("%v ended with %d", args, code)
				}
				if len(args) == 2 && (code != Wrong || !strings.Contains(errOut, c.want) || !strings.Contains(errOut, "mend: ")) {
					t.Errorf("%v ended with %d and says %q, want %q and a mend", args, code, errOut, c.want)
				}
			}
		})
	}
}
