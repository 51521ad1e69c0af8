package report

import (
	"fmt"
	"strings"
	"testing"

	"gaugelog/analysis"
)

const hostile = `<script>alert("x")</script> | ` + "`a` *b* =1+1 \x00\x07 \u202e 🜨 </table>"

// Whatever the run lacks, the report stays whole in every format and says what
// is missing.
func TestWhatIsMissingIsSaid(t *testing.T) {
	for name, c := range map[string]struct {
		spoil func(r *analysis.Result, o *Options)
		says  []string
	}{
		"no stiffness": {func(r *analysis.Result, o *Options) {
			r.Stiffness = analysis.Stiffness{InitialAfterS: 60}
			r.Series.Curve = nil
			r.Warnings = append(r.Warnings, analysis.Warning{Code: "no-modulus", Text: "only one gauge reads"})
			for i := range r.Steps {
				r.Steps[i].Largest = nil
			}
		}, []string{"No stiffness was worked out: only one gauge reads.", "No curve was fitted", "not measured"}},
		"no creep": {func(r *analysis.Result, o *Options) {
			r.Creep = analysis.Creep{InitialAfterS: 60}
			r.Series.Law, r.Series.Creep = nil, nil
			r.Warnings = append(r.Warnings, analysis.Warning{Code: "no-creep", Text: "the load hung for a minute"})
		}, []string{"No creep was worked out: the load hung for a minute.", "No recovery was worked out"}},
		"ten readings": {func(r *analysis.Result, o *Options) {
			run := r.Run
			run.Readings = 10
			*r = analysis.Result{Schema: r.Schema, Run: run}
			for i := range 10 {
				g := analysis.GaugeSeries{Gauge: "mid", Sees: "beam", AtMM: 300, TimeS: []float64{float64(i)}, SagMM: []float64{0}, RawMM: []float64{0}}
				r.Series.Gauges = []analysis.GaugeSeries{g}
			}
			o.Marks, o.Amendments, o.Events = nil, nil, nil
		}, []string{"No load step was found", "No stiffness was worked out", "No creep was worked out", "No rule was asked for", "Neither temperature nor humidity", "10 readings", "No mark is at hand", "No disturbance was found"}},
		"a gauge without a word": {func(r *analysis.Result, o *Options) {
			for i := range r.Steps {
				g := &r.Steps[i].Gauges[3]
				g.Initial, g.Increment, g.Final, g.SagAt = nil, nil, nil, nil
			}
			r.Series.Gauges[3] = analysis.GaugeSeries{Gauge: "station", Sees: "beam", AtMM: 1300}
			r.Creep.Parameters = map[string]analysis.Q{}
			r.Creep.Model = ""
		}, []string{"No law was fitted", "–"}},
		"no rig": {func(r *analysis.Result, o *Options) { o.Rig, o.Files = nil, nil }, []string{"The rig file is not at hand", "the run folder is not at hand"}},
		"hostile texts": {func(r *analysis.Result, o *Options) {
			r.Run.Title = hostile
			o.Rig.Specimen.Name, o.Rig.Gauges[0].SerialNumber = hostile, hostile
			o.Marks[0].What, o.Marks[0].By = hostile, hostile
			r.Disturbances[0].Evidence, r.Evaluations[0].Why = hostile, hostile
		}, nil},
		"very long names": {func(r *analysis.Result, o *Options) {
			long := strings.Repeat("verylongname", 30)
			r.Run.Title = strings.Repeat("A title of many words ", 60)
			for i := range r.Steps {
				r.Steps[i].Step = long
				for j := range r.Steps[i].Gauges {
					r.Steps[i].Gauges[j].Gauge = long + fmt.Sprint(j)
				}
			}
			for i := range r.Series.Gauges {
				r.Series.Gauges[i].Gauge = long
			}
			r.Creep.Gauge = long
			r.Evaluations[0].Clause = long
		}, nil},
		"forty gauges": {func(r *analysis.Result, o *Options) {
			for i := range r.Steps {
				for len(r.Steps[i].Gauges) < 40 {
					g := r.Steps[i].Gauges[0]
					g.Gauge = fmt.Sprintf("g%d", len(r.Steps[i].Gauges))
					r.Steps[i].Gauges = append(r.Steps[i].Gauges, g)
				}
			}
		}, []string{"(gauges 33 to 40)"}},
	} {
		t.Run(name, func(t *testing.T) {
			r, o := demoResult(t), demoOptions(t)
			c.spoil(r, &o)
			d := Build(r, o)
			for _, format := range Formats {
				out := string(render(t, d, format))
				if format == "pdf" {
					continue // its texts are compared with the document elsewhere
				}
				for _, bad := range []string{"NaN", "Inf ", "<script", "<nil>", "%!", "\x00", "\x07", "\u202e"} {
					if strings.Contains(out, bad) && (format == "html" || bad != "<script") {
						t.Errorf("%s holds %q", format, bad)
					}
				}
				for _, want := range c.says {
					if !strings.Contains(squeeze(plainOf(t, format, []byte(out))), squeeze(want)) {
						t.Errorf("%s does not say %q", format, want)
					}
				}
				if !strings.Contains(out, Cautions[0][:20]) {
					t.Errorf("%s lacks the cautions", format)
				}
			}
			page := string(render(t, d, "html"))
			for _, e := range []string{"section", "table", "tr", "td", "th", "figure", "svg", "div", "p", "ul", "li"} {
				open := strings.Count(page, "<"+e+" ") + strings.Count(page, "<"+e+">")
				if shut := strings.Count(page, "</"+e+">"); open != shut {
					t.Errorf("%d <%s> and %d </%s>", open, e, shut, e)
				}
			}
		})
	}
}

// Calibrations are held against the readings' time, never the clock.
func TestCalibrationsAgainstTheReadings(t *testing.T) {
	for due, want := range map[string]string{
		"2026-03-01": "had run out on 2026-03-01, before the first reading",
		"2026-03-02": "ran out on 2026-03-02, during the test",
		"2026-03-09": "ran out on 2026-03-09, during the test",
		"2026-03-10": "is due on 2026-03-10, 0 days after the last reading",
		"2026-04-08": "is due on 2026-04-08, 29 days after the last reading",
		"2026-04-10": "",
		"":           "",
	} {
		o := demoOptions(t)
		o.Rig.Gauges[2].Calibration.Due = due
		out := string(render(t, Build(demoResult(t), o), "text"))
		line := "The calibration of gauge quarter-a "
		if got := strings.Contains(out, line); got != (want != "") || !strings.Contains(out, want) {
			t.Errorf("due %q: the report does not say %q", due, want)
		}
	}
	o := demoOptions(t)
	o.Rig.Gauges[0].Calibration = nil
	if out := string(render(t, Build(demoResult(t), o), "text")); !strings.Contains(out, "No calibration is stated for tail") {
		t.Error("a gauge without a calibration is not told of")
	}
}

// A reason that every clause shares stands once, and nothing is lost.
func TestShortWhys(t *testing.T) {
	whys, tail := shortWhys("r", []analysis.Evaluation{
		{Why: "holds; load too small; from the plan; rule r; informative"},
		{Why: "cannot: no width; from the plan; rule r; informative"},
	})
	if tail != "from the plan" || whys[0] != "load too small" || whys[1] != "cannot: no width" {
		t.Errorf("%q %q", whys, tail)
	}
	if whys, tail = shortWhys("r", []analysis.Evaluation{{Why: "holds; alone; rule r"}}); whys[0] != "alone" || tail != "" {
		t.Errorf("%q %q", whys, tail)
	}
}
