package main

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"text/tabwriter"
	"time"

	"gaugelog/analysis"
	"gaugelog/analysis/compare"
	"gaugelog/analysis/report"
	"gaugelog/analysis/unitsystem"
)

// teller prints a comparison in one system of units.
type teller struct {
	w     io.Writer
	units string
}

func (t teller) comparison(c *compare.Comparison) error {
	factor, unit := report.Convert(t.units, "mm")
	w := tabwriter.NewWriter(t.w, 0, 8, 2, ' ', 0)
	fmt.Fprintf(w, "\trun\tspecimen\tspan, %s\n", unit)
	for i, s := range c.Specimens {
		fmt.Fprintf(w, "%d\t%s\t%s\t%.5g\n", i+1, s.Run, s.Specimen, s.SpanMM*factor)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	for _, f := range c.Figures {
		if err := t.figure(f); err != nil {
			return err
		}
	}
	if c.Spans != nil {
		if err := t.spans(c.Spans); err != nil {
			return err
		}
	}
	for _, warning := range c.Warnings {
		fmt.Fprintf(t.w, "warning: %s\n", unitsystem.Text(t.units, warning.Text))
	}
	return nil
}

func (t teller) figure(f compare.Figure) error {
	factor, unit := report.Convert(t.units, f.Unit)
	title := strings.ReplaceAll(f.Name, "_", " ")
	if unit != "" {
		title += ", " + unit
	}
	if f.AfterS > 0 {
		title += " (" + (time.Duration(f.AfterS * float64(time.Second))).String() + " after full load)"
	}
	fmt.Fprintf(t.w, "\n%s\n", title)
	w := tabwriter.NewWriter(t.w, 0, 8, 2, ' ', tabwriter.AlignRight)
	for i, q := range f.Values {
		fmt.Fprintf(w, "  %d\t%s\t\n", i+1, valueWords(q, factor))
	}
	for _, d := range f.Differences {
		fmt.Fprintf(w, "  %d less %d\t%s\t  %s\t\n", d.B+1, d.A+1, valueWords(&d.Value, factor), differenceWords(d, factor))
	}
	if err := w.Flush(); err != nil {
		return err
	}
	if s := f.Sample; s != nil {
		// Equal values have no scatter to round by.
		by := max(s.Half, 1e-5*math.Abs(s.Mean)) * factor
		_, half := report.Rounded(0, s.Half*factor)
		shown := func(v float64) string {
			text, _ := report.Rounded(v*factor, by)
			return text
		}
		_, sd := report.Rounded(0, s.SD*factor)
		fmt.Fprintf(t.w, "  sample of %d: mean %s, standard deviation %s (%.1f %%), median %s, from %s to %s; the mean lies within ±%s (95 %%)\n",
			s.N, shown(s.Mean), sd, 100*s.CV, shown(s.Median), shown(s.Least), shown(s.Most), half)
	}
	return nil
}

func differenceWords(d compare.Difference, factor float64) string {
	if d.Value.U == nil {
		return "its uncertainty is not known"
	}
	words := "within 2 u"
	if d.Beyond {
		words = "beyond 2 u"
	}
	if len(d.Shared) > 0 {
		_, alone := report.Rounded(0, *d.UIndependent*factor)
		words += fmt.Sprintf("; u would be %s without what both share: %s", alone, strings.Join(d.Shared, ", "))
	}
	return words
}

// valueWords shows a value times factor with its u, digits by two of u.
func valueWords(q *analysis.Q, factor float64) string {
	switch {
	case q == nil:
		return "–"
	case q.U == nil:
		return fmt.Sprintf("%.4g", q.Value*factor)
	}
	value, u := report.Rounded(q.Value*factor, *q.U*factor)
	return value + ", u " + u
}

// flexible is the unit in which 1/E is shown, and its factor from 1/MPa.
func flexible(units string) (factor float64, unit string) {
	if units == "us" {
		f, _ := report.Convert(units, "MPa")
		return 1e6 / f, "1/Mpsi"
	}
	return 1000, "1/GPa"
}

func (t teller) spans(s *compare.Spans) error {
	length, mm := report.Convert(t.units, "mm")
	inverse, per := flexible(t.units)
	fmt.Fprintf(t.w, "\none specimen at several spans: 1/E_apparent over (h/L)^2\n")
	w := tabwriter.NewWriter(t.w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(w, "  span, %s\t(h/L)^2\t1/E_apparent, %s\tu\tline\t\n", mm, per)
	for _, p := range s.Points {
		d := report.Digits(p.U * inverse)
		fmt.Fprintf(w, "  %.5g\t%.6f\t%.*f\t%.*f\t%.*f\t\n", p.SpanMM*length, p.X, d, p.Y*inverse, d, p.U*inverse, d, p.Fitted*inverse)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	factor, unit := report.Convert(t.units, "MPa")
	fmt.Fprintf(t.w, "  modulus %s %s; shear modulus %s %s (shear factor %.3f); correlation %.2f\n",
		valueWords(&s.Modulus, factor), unit, valueWords(&s.ShearModulus, factor), unit, s.ShearFactor, s.Correlation)
	if s.DOF > 0 {
		fmt.Fprintf(t.w, "  chi-square %.2f at %d degrees of freedom (p = %.2g)\n", s.Chi2, s.DOF, s.P)
	} else {
		fmt.Fprintln(t.w, "  two spans make a line whatever they are: a third would show whether it is one")
	}
	return nil
}

// drawSpans writes the plot of the variable-span method as SVG; an existing
// file is not overwritten.
func drawSpans(path string, s *compare.Spans, units string) error {
	if s == nil {
		return wrongf("give runs of one specimen at several spans, loaded in the middle", "there is no line over several spans to draw")
	}
	if _, err := os.Stat(path); err == nil {
		return wrongf("give another name, or remove it first", "%s exists already", path)
	}
	inverse, per := flexible(units)
	var p report.SpanPlot
	p.Unit = per
	for _, one := range s.Points {
		p.X, p.Y, p.U = append(p.X, one.X), append(p.Y, one.Y*inverse), append(p.U, one.U*inverse)
	}
	p.Intercept, p.Slope = s.Intercept*inverse, s.Slope*inverse
	var svg bytes.Buffer
	if err := report.DrawSpans(&svg, p); err != nil {
		return err
	}
	return replaceFile(path, svg.Bytes())
}
