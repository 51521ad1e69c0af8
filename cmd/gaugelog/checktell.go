package main

import (
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"
	"time"

	"gaugelog/analysis/report"
	"gaugelog/analysis/stiffness"
	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
)

// lapsed is a calibration that has expired.
type lapsed struct {
	Gauge string `json:"gauge"`
	Due   string `json:"due"`
	Days  int    `json:"days"` // since the day it was due
}

// calibrationsAt lists the calibrations that have expired at an instant; the
// day on which one is due still counts. Dates are the rig's own.
func calibrationsAt(rig *config.Rig, now time.Time) []lapsed {
	zone := time.UTC
	if l, err := time.LoadLocation(rig.Timezone); err == nil && rig.Timezone != "" {
		zone = l
	}
	out := []lapsed{}
	for _, g := range rig.Gauges {
		if g.Calibration == nil || g.Calibration.Due == "" {
			continue
		}
		due, err := time.ParseInLocation(time.DateOnly, g.Calibration.Due, zone)
		if err != nil { // the rig file's own check names it
			continue
		}
		if end := due.AddDate(0, 0, 1); !now.Before(end) {
			out = append(out, lapsed{g.Name, g.Calibration.Due, 1 + int(now.Sub(end).Hours()/24)})
		}
	}
	return out
}

// foreteller prints what was found and foretold in one system of units.
type foreteller struct {
	w     io.Writer
	units string
}

func (f foreteller) print(rig *config.Rig, c checked) error {
	fmt.Fprintf(f.w, "%s: %s, %s, %s, %s\n", c.Rig, count(len(rig.Gauges), "gauge"), count(len(rig.Supports), "support"),
		count(len(rig.Loads), "load"), count(len(rig.Plan), "planned step"))
	for _, l := range c.Calibrations {
		fmt.Fprintf(f.w, "warning: the calibration of gauge %s expired %s ago (due %s); mend: calibrate it, or have it calibrated, before the test\n", l.Gauge, count(l.Days, "day"), l.Due)
	}
	if c.Prediction == nil {
		fmt.Fprintf(f.w, "\nNothing is foretold: %s\n", f.text(c.NotForetold))
	} else {
		f.steps(rig, c.Prediction)
		f.gauges(c.Prediction)
		f.reach(c.Prediction)
		for _, warning := range c.Prediction.Warnings {
			fmt.Fprintf(f.w, "warning: %s\n", f.text(warning.Text))
		}
	}
	fmt.Fprintf(f.w, "\nCautions\n")
	for _, text := range report.Cautions {
		fmt.Fprintf(f.w, "  - %s\n", text)
	}
	return nil
}

// text shows a sentence's quantities in the units asked for.
func (f foreteller) text(s string) string { return unitsystem.Text(f.units, s) }

// count prints a number with its noun.
func count(n int, noun string) string {
	if n != 1 {
		noun += "s"
	}
	return fmt.Sprintf("%d %s", n, noun)
}

// length prints a length with the digits that suit its unit.
func (f foreteller) length(mm float64, decimals int) string {
	factor, unit := report.Convert(f.units, "mm")
	if unit == "in" {
		decimals++
	}
	text := fmt.Sprintf("%.*f", decimals, mm*factor)
	if strings.Trim(text, "-0.") == "" {
		text = strings.TrimPrefix(text, "-")
	}
	return text
}

func (f foreteller) table() *tabwriter.Writer {
	return tabwriter.NewWriter(f.w, 0, 8, 2, ' ', tabwriter.AlignRight)
}

func (f foreteller) steps(rig *config.Rig, p *stiffness.Prediction) {
	_, mm := report.Convert(f.units, "mm")
	factor, stress := report.Convert(f.units, "MPa")
	decimals := 2
	if f.units == "us" {
		decimals = 0
	}
	fmt.Fprintf(f.w, "\nThe plan, foretold with the expected modulus (sag from the baseline)\n")
	t := f.table()
	fmt.Fprintf(t, "step\tgreatest sag, %s\tat, %s\twith creep, %s\tstress, %s\tof strength\tlifts off\t\n", mm, mm, mm, stress)
	for _, s := range p.Steps {
		share, lifts := "–", "–"
		if s.StressShare > 0 {
			share = fmt.Sprintf("%.1f %%", 100*s.StressShare)
		}
		if len(s.Uplift) > 0 {
			lifts = strings.Join(s.Uplift, ", ")
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%.*f\t%s\t%s\t\n", s.Step, f.length(s.Greatest.Value, 3), f.length(s.Greatest.At, 0),
			f.length(s.WithCreep, 3), decimals, s.Stress*factor, share, lifts)
	}
	t.Flush()
	if gap := rig.Limits.CatcherGap; gap != nil {
		fmt.Fprintf(f.w, "The catcher is %s %s below the load.\n", f.length(gap.Value, 1), mm)
	}
}

// gauges prints a matrix of sag and travel by step, and each gauge's farthest.
func (f foreteller) gauges(p *stiffness.Prediction) {
	if len(p.Steps) == 0 || len(p.Steps[0].Gauges) == 0 {
		return
	}
	_, mm := report.Convert(f.units, "mm")
	fmt.Fprintf(f.w, "\nEach gauge, sag in %s with creep, and share of its travel\n", mm)
	t := f.table()
	fmt.Fprintf(t, "gauge\tat, %s\t", mm)
	for _, s := range p.Steps {
		fmt.Fprintf(t, "%s\t", s.Step)
	}
	fmt.Fprintln(t)
	for i, g := range p.Steps[0].Gauges {
		fmt.Fprintf(t, "%s\t%s\t", g.Gauge, f.length(g.AtMM, 0))
		for _, s := range p.Steps {
			fmt.Fprintf(t, "%s%s\t", f.length(s.Gauges[i].WithCreep, 2), travel(s.Gauges[i], " (%.0f %%)"))
		}
		fmt.Fprintln(t)
	}
	t.Flush()
	fmt.Fprintf(f.w, "\nEach gauge at its farthest\n")
	t = f.table()
	fmt.Fprintf(t, "gauge\tstep\tsag, %s\twith creep, %s\tslope, 1/1000\ttravel used\t\n", mm, mm)
	for i := range p.Steps[0].Gauges {
		far := 0
		for k, s := range p.Steps {
			if math.Abs(s.Gauges[i].WithCreep) > math.Abs(p.Steps[far].Gauges[i].WithCreep)+1e-9 {
				far = k
			}
		}
		g := p.Steps[far].Gauges[i]
		used := travel(g, "%.0f %%")
		if used == "" {
			used = "–"
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%.2f\t%s\t\n", g.Gauge, p.Steps[far].Step, f.length(g.Sag, 3), f.length(g.WithCreep, 3), 1000*g.Slope, used)
	}
	t.Flush()
}

// travel prints the share of a gauge's travel, "" where none is stated or used.
func travel(g stiffness.PredictedGauge, format string) string {
	if math.Round(100*g.TravelUsed) == 0 {
		return ""
	}
	return fmt.Sprintf(format, 100*g.TravelUsed)
}

func (f foreteller) reach(p *stiffness.Prediction) {
	if p.Unreachable != "" {
		fmt.Fprintf(f.w, "\nHow well the modulus can be known: %s\n", f.text(p.Unreachable))
		return
	}
	fmt.Fprintf(f.w, "\nThe modulus can be known to %.2f %% (standard), %.2f %% for 95 %%; scatter and drift come on top\n", 100*p.RelativeU, 100*p.RelativeU95)
	for _, h := range p.Dominating {
		fmt.Fprintf(f.w, "  %.0f %% of it from %s; halve that and it is %.2f %%\n", 100*h.Share, h.Input, 100*h.RelativeU)
	}
	if p.CreepU > 0 {
		fmt.Fprintf(f.w, "The creep coefficient can be known to %.2g (standard) as far as the gauges go; drift and temperature come on top\n", p.CreepU)
		for _, h := range p.CreepDominating {
			fmt.Fprintf(f.w, "  %.0f %% of it from %s; halve that and it is %.2g\n", 100*h.Share, h.Input, h.RelativeU)
		}
	}
}
