package main

import (
	"html"
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
		{name: "span of next to nothing", old: "{name: right, at: 600 mm}", new: "{name: right, at: 0.001 mm}", want: "stand at one place"},
		{name: "second moment beyond the depth's", old: "shape: rectangle, width: 100 mm, depth: 40 mm, u: 0.02 mm", new: "shape: general, second_moment: 6.4e5 mm4, area: 53.1 mm2, shear_factor: 0.83, depth: 38 mm", want: "contradict each other"},
		{name: "no gauge on the beam", old: "sense: down, resolution", new: "sees: seat, sense: down, resolution", want: "not the beam"},
		{name: "beam shorter than its span", old: "length: 800 mm", new: "length: 500 mm", want: "right"},
		{name: "depths that differ tenfold", old: "depth: 40 mm", new: "depth: [40 mm, 4 mm]", want: "is not to be used", analyses: true},
		{name: "a depth of a nanometre", old: "depth: 40 mm", new: "depth: 0.000001 mm", want: "is no material's", analyses: true},
		{name: "a place known to a span", old: "{name: right, at: 600 mm}", new: "{name: right, at: 600(500) mm}", want: "is not to be used", analyses: true},
		{name: "three supports and one gauge", old: "{name: right, at: 600 mm}", new: "{name: middle, at: 310 mm}, {name: right, at: 600 mm}", want: "no stiffness", analyses: true},
		{name: "gauge over a support alone", old: "{name: mid, at: 300 mm", new: "{name: mid, at: 0 mm", want: "no stiffness", analyses: true},
		{name: "loads over the supports", old: "{name: pan, at: 300 mm}", new: "{name: pan, at: 600 mm}", want: "no stiffness", analyses: true},
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
			all := [][]string{{"check", file}, {"check", file, "--json"}, {"analyse", dir}, {"analyse", dir, "--json"}, {"analyse", dir, "--units", "us"}}
			if c.analyses {
				all = append(all, []string{"report", dir, "--format", "csv"}, []string{"report", dir, "--format", "md"}, []string{"report", dir}, []string{"compare", dir, dir + "/."})
			}
			for _, args := range all {
				code, out, errOut := gaugelog(args...)
				if args[0] == "report" {
					page, err := os.ReadFile(strings.TrimSpace(out))
					if err != nil {
						t.Fatal(err)
					}
					out = string(page)
				}
				if bad := notANumber.FindString(out + errOut); bad != "" {
					t.Errorf("%v: a figure is %s:\n%s", args, bad, out)
				}
				if c.analyses {
					said := args[0] == "analyse" || args[0] == "report"
					if said && code != Done {
						t.Errorf("%v ended with %d: %s", args, code, errOut)
					}
					if said && !strings.Contains(html.UnescapeString(out), c.want) {
						t.Errorf("%v does not say %q", args, c.want)
					}
					continue
				}
				if args[0] == "check" && len(args) == 3 && code != Wrong {
					t.Errorf("%v ended with %d", args, code)
				}
				if len(args) != 3 && (code != Wrong || !strings.Contains(errOut, c.want) || !strings.Contains(errOut, "mend: ")) {
					t.Errorf("%v ended with %d and says %q, want %q and a mend", args, code, errOut, c.want)
				}
			}
		})
	}
}
