package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"gaugelog/analysis/compare"
)

// foreignRun writes a run folder of plain line protocol: a board of E = 11500
// MPa and G = 700 MPa over a span, 40 mm deep and 100 mm wide, 10 kg in the
// middle after ten minutes, by Timoshenko's closed form for three points
// w = F L^3 / 48 E I + F L / (4 kappa G A).
func foreignRun(t *testing.T, dir, specimen string, span, kg float64) string {
	t.Helper()
	run := filepath.Join(dir, fmt.Sprintf("%s-%g", specimen, span))
	if err := os.MkdirAll(filepath.Join(run, "readings"), 0o755); err != nil {
		t.Fatal(err)
	}
	rig := fmt.Sprintf(`title: board %[1]s
specimen: {name: %[1]s, material: timber, section: {shape: rectangle, width: 100 mm, depth: 40 mm, u: 0.02 mm}, from: -100 mm, length: %[3]g mm}
gravity: {latitude: 55.9, height: 60 m}
supports: [{name: left, at: 0 mm}, {name: right, at: %[2]g mm}]
gauges: [{name: mid, at: %[4]g mm, sense: down, resolution: 0.001 mm, u: 0.001 mm, serial_number: "7", calibration: {gain: 1, u_gain: 0.001, date: 2026-01-02, due: 2028-01-02}}]
loads: [{name: pan, at: %[4]g mm}]
read: {initial_after: 60 s, creep_gauge: mid}
`, specimen, span, span+200, span/2)
	newton := kg * 9.8158
	second, area := 100*40*40*40/12.0, 4000.0
	sag := newton*math.Pow(span, 3)/(48*11500*second) + newton*span/(4*5.0/6*700*area)
	const start = 1_790_000_000
	var readings strings.Builder
	for i := range 360 {
		mm := 2.0
		if i >= 60 {
			mm += sag
		}
		// A thousandth of flicker, by turns, so that scatter is known.
		fmt.Fprintf(&readings, "indication,gauge=mid mm=%.4f %d000000000\n", mm+0.0005*float64(i%3-1), start+10*i)
	}
	marks := fmt.Sprintf("load,name=pan by=\"\",id=\"m1\",kilogram=%g,newton=%g,shown=\"%g kg\",step=\"l1\" %d000000000\n", kg, newton, kg, start+595)
	for name, text := range map[string]string{"rig.yaml": rig, "marks.lp": marks, "readings/000001.lp": readings.String()} {
		if err := os.WriteFile(filepath.Join(run, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return run
}

// steadyRun is a foreignRun on supports that are stated not to yield: what they
// do grows in weight as spans get shorter, and would pass for shear.
func steadyRun(t *testing.T, dir, specimen string, span, kg float64) string {
	t.Helper()
	run := foreignRun(t, dir, specimen, span, kg)
	name := filepath.Join(run, "rig.yaml")
	text, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	stiff := regexp.MustCompile(`(\{name: (?:left|right), at: \S+ mm)\}`).ReplaceAll(text, []byte("$1, compliance: 0.0000000(5) mm/N}"))
	if err := os.WriteFile(name, stiff, 0o644); err != nil {
		t.Fatal(err)
	}
	return run
}

func gaugelog(args ...string) (Code, string, string) {
	var out, errOut bytes.Buffer
	code := run(args, strings.NewReader(""), &out, &errOut)
	return code, out.String(), errOut.String()
}

// One specimen at four spans: from readings and marks to E and G.
func TestCompareSpans(t *testing.T) {
	dir := t.TempDir()
	args := []string{"compare", "--spans", "--json"}
	for _, span := range []float64{1600, 800, 500, 320} {
		args = append(args, steadyRun(t, dir, "one", span, 40))
	}
	code, out, errOut := gaugelog(args...)
	if code != Done {
		t.Fatalf("exit %d: %s", code, errOut)
	}
	var c compare.Comparison
	if err := json.Unmarshal([]byte(out), &c); err != nil {
		t.Fatal(err)
	}
	e, g := c.Spans.Modulus, c.Spans.ShearModulus
	if math.Abs(e.Value-11500) > 2**e.U || math.Abs(g.Value-700) > 2**g.U {
		t.Errorf("E %g (u %g), G %g (u %g); true 11500 and 700", e.Value, *e.U, g.Value, *g.U)
	}
	if len(c.Spans.Points) != 4 {
		t.Errorf("%d points", len(c.Spans.Points))
	}
	if code, out, _ := gaugelog(append([]string{"compare"}, args[3:]...)...); code != Done || !strings.Contains(out, "1/E_apparent over (h/L)^2") {
		t.Errorf("exit %d:\n%s", code, out)
	}
}

// Two specimens: the difference says what they share.
func TestCompareSpecimens(t *testing.T) {
	dir := t.TempDir()
	a, b := steadyRun(t, dir, "a", 800, 40), steadyRun(t, dir, "b", 800, 40)
	code, out, errOut := gaugelog("compare", a, b)
	if code != Done || !strings.Contains(out, "without what both share") || !strings.Contains(out, "gain of gauge mid") || !strings.Contains(out, "sample of 2") {
		t.Errorf("exit %d:\n%s%s", code, out, errOut)
	}
	for want, args := range map[string][]string{
		"1 run is nothing to compare":     {"compare", a},
		"is given twice":                  {"compare", a, a},
		"is no run folder":                {"compare", a, dir},
		"runs are of different specimens": {"compare", "--spans", a, b},
	} {
		if code, _, errOut := gaugelog(args...); code != Wrong || !strings.Contains(errOut, want) || !strings.Contains(errOut, "mend: ") {
			t.Errorf("%v: exit %d, %q, want %q with a mend", args, code, errOut, want)
		}
	}
}

// The plot of several spans is one SVG with the line and the points, in the
// units asked for, and no table mixes units.
func TestComparePlotAndUnits(t *testing.T) {
	dir := t.TempDir()
	args := []string{"compare"}
	for _, span := range []float64{300, 450, 700} {
		args = append(args, steadyRun(t, dir, "board", span, 10))
	}
	file := filepath.Join(dir, "spans.svg")
	code, out, errOut := gaugelog(append(args, "--units", "us", "--plot", file)...)
	if code != Done {
		t.Fatalf("compare ended with %d: %s", code, errOut)
	}
	for _, want := range []string{"span, in", "psi", "1/Mpsi"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	for _, no := range []string{"MPa", " mm", "1/GPa", "N/mm"} {
		if strings.Contains(out, no) {
			t.Errorf("%q in US units:\n%s", no, out)
		}
	}
	svg, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"<svg", "(h/L)", "1/Mpsi"} {
		if !strings.Contains(string(svg), want) {
			t.Errorf("no %q in the plot", want)
		}
	}
	if code, _, errOut = gaugelog(append(args, "--plot", file)...); code == Done || !strings.Contains(errOut, "exists already") {
		t.Errorf("an existing plot was overwritten: %d %s", code, errOut)
	}
	if code, _, errOut = gaugelog(append(args, "--units", "furlongs")...); code == Done || !strings.Contains(errOut, "mend:") {
		t.Errorf("odd units were taken: %d %s", code, errOut)
	}
}
