package config

import (
	"math"
	"os"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// Parse never panics, and whatever it takes is checked, spliced and amended
// without a panic too. Run longer with
//
//	go test ./config -run '^$' -fuzz FuzzParse -fuzztime 60s
func FuzzParse(f *testing.F) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		f.Fatal(err)
	}
	f.Add(text)
	f.Add(Template(TemplateOptions{}))
	for _, tc := range wrongRigs {
		f.Add([]byte(strings.Replace(strings.Replace(string(text), tc.old, tc.new, 1), "§", "", 1)))
	}
	f.Add([]byte("a: &a [*a]"))
	f.Add([]byte("gauges: [{name: a, at: 1 mm, travel: []}]"))
	f.Fuzz(func(t *testing.T, text []byte) {
		r, err := Parse("rig.yaml", text)
		if err != nil {
			if list, ok := err.(Problems); !ok || len(list) == 0 || list.Error() == "" {
				t.Fatalf("an error that is no list of problems: %#v", err)
			}
			return
		}
		for _, p := range append(r.Check(), r.CheckPorts()...) {
			if p.What == "" {
				t.Fatal("a problem without a text")
			}
		}
		if _, err := r.Apply([]Amendment{{Path: "title", Value: "x"}}); err != nil {
			t.Fatalf("a title could not be amended: %v", err)
		}
	})
}

// No text makes a reader of quantities panic, and what it takes is finite.
//
//	go test ./config -run '^$' -fuzz FuzzQuantity -fuzztime 60s
func FuzzQuantity(f *testing.F) {
	for _, s := range []string{"300.0(5) mm", "12.40kg", "1e30 GB", "-4 F", "10.02(2)", "1.6e6 psi", "5e-7(3) m", "٣ mm", "1(9999999999999999999999999999999999999999)e30 ft"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		for _, d := range allDimensions() {
			q, problem := d.parse(s)
			if problem != nil {
				if problem.What == "" || problem.Fix == "" {
					t.Fatalf("%q as %s: no text or mend: %+v", s, d.name, problem)
				}
				continue
			}
			if math.IsNaN(q.Value) || math.IsInf(q.Value, 0) || math.IsInf(q.U, 0) || q.U < 0 {
				t.Fatalf("%q as %s = %+v", s, d.name, q)
			}
			if again, problem := d.parse(q.Shown); problem != nil || again != q {
				t.Fatalf("%q shows as %q, which reads as %+v", s, q.Shown, again)
			}
		}
		if w, err := ParseWeight(s); err == nil && (w.Mass == nil) == (w.Force == nil) {
			t.Fatalf("%q is %+v", s, w)
		}
		_, _ = ParseNumber(s)
	})
}

// What Splice writes is read back as that text, and all around it stays.
func TestSpliceRoundTrip(t *testing.T) {
	text, err := os.ReadFile("testdata/slat.yaml")
	if err != nil {
		t.Fatal(err)
	}
	paths := []string{"title", "details.Moisture", "details.new", "test.operator", "gauges[mid].port", "gauges[mid].serial_number", "gauges[mid].channel", "frames[streamed].unit", "loads[pan].name", "evaluate[1]"}
	rapid.Check(t, func(t *rapid.T) {
		path := rapid.SampledFrom(paths).Draw(t, "path")
		value := rapid.OneOf(rapid.String(), rapid.StringMatching(`[a-z0-9:#'" ,{}\[\]&*!|>%@\\-]{0,12}`)).Draw(t, "value")
		got, err := Splice(text, path, value)
		if err != nil {
			t.Fatalf("%s = %q: %v", path, value, err)
		}
		root, problem := parseYAML("", got, "")
		if problem != nil {
			t.Fatal(problem)
		}
		parts, _ := parsePath(path)
		n := root
		for _, part := range parts {
			if part.key == "pan" && path == "loads[pan].name" {
				part.key = "0"
			}
			if n, _, err = step(n, part); err != nil || n == nil {
				t.Fatalf("%s is gone: %v", path, err)
			}
		}
		if n.Value != value || n.ShortTag() == "!!null" {
			t.Fatalf("%s = %q reads as %q", path, value, n.Value)
		}
		front, back := 0, 0
		for front < min(len(text), len(got)) && text[front] == got[front] {
			front++
		}
		for back < min(len(text), len(got))-front && text[len(text)-1-back] == got[len(got)-1-back] {
			back++
		}
		if changed := string(text[front : len(text)-back]); strings.Contains(changed, "\n") {
			t.Fatalf("more than one value was touched: %q", changed)
		}
	})
}
