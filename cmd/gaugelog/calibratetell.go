package main

import (
	"fmt"
	"io"
	"math"
	"text/tabwriter"

	"gaugelog/analysis/calibrate"
	"gaugelog/analysis/unitsystem"
)

func tellCalibration(w io.Writer, f calibrateFlags, gauge string, s calibrate.Session, l *calibrate.Line, kept string) error {
	if f.asJSON {
		return printJSON(w, calibrated{gauge, s.Points, l, kept})
	}
	factor, unit := unitsystem.Convert(f.units, "mm")
	fine := 4 // decimals of a reading; one more for what is smaller
	if unit == "in" {
		fine++
	}
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "block, %[1]s\tway\treading, %[1]s\toff the line, %[1]s\t\n", unit)
	for i, p := range s.Points {
		fmt.Fprintf(t, "%.6g\t%s\t%.*f\t%+.*f\t\n", p.BlockMM*factor, p.Direction, fine, p.ReadingMM*factor, fine, l.Residuals[i]*factor)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	mm := func(v float64, more int) string { return fmt.Sprintf("%.*f %s", fine+more, v*factor, unit) }
	fmt.Fprintf(w, "\ngauge %s: indication = offset + gain * true\n", gauge)
	fmt.Fprintf(w, "  offset %s, u %s; gain %.6f, u %.6f; correlation %.3f\n", mm(l.Offset, 1), mm(l.UOffset, 1), l.Gain, l.UGain, l.Correlation)
	fmt.Fprintf(w, "  scatter about the line %s (%d degrees of freedom); u of one reading %s\n", mm(l.ResidualSD, 1), l.DOF, mm(l.ReadingU, 1))
	tellFaults(w, l, mm, factor, unit)
	first, last := s.Points[0].ReadingMM, s.Points[0].ReadingMM
	for _, p := range s.Points {
		first, last = math.Min(first, p.ReadingMM), math.Max(last, p.ReadingMM)
	}
	at, diff := l.Corrected(last), l.Difference(first, last)
	fmt.Fprintf(w, "  a reading of %s means %s, u %s; from %s to %s is %s, u %s (the offset drops out)\n",
		mm(last, 0), mm(at.MM, 0), mm(at.U, 1), mm(first, 0), mm(last, 0), mm(diff.MM, 0), mm(diff.U, 1))
	for _, warning := range l.Warnings {
		fmt.Fprintf(w, "warning: %s\n", unitsystem.Text(f.units, warning.Text))
	}
	return nil
}

// tellFaults says what the gauge does beside the line.
func tellFaults(w io.Writer, l *calibrate.Line, mm func(v float64, more int) string, factor float64, unit string) {
	sign := func(v float64) string {
		if v >= 0 {
			return "+"
		}
		return ""
	}
	if h := l.Hysteresis; h != nil {
		fmt.Fprintf(w, "  hysteresis %s%s at the block of %.6g %s (down less up, greatest of %d blocks)\n", sign(h.MM), mm(h.MM, 0), h.BlockMM*factor, unit, h.Blocks)
	} else {
		fmt.Fprintln(w, "  hysteresis: not known, no block was taken both ways")
	}
	if r := l.Repeatability; r != nil {
		fmt.Fprintf(w, "  repeatability %s (%d degrees of freedom)\n", mm(r.SD, 1), r.DOF)
	} else {
		fmt.Fprintln(w, "  repeatability: not known, no block was taken twice the same way")
	}
	enough := "a line is enough"
	if !l.Curvature.LineEnough {
		enough = "a line is NOT enough"
	}
	fmt.Fprintf(w, "  %s: a curve would leave its chord by %s%s in the middle (p = %.2g)\n", enough, sign(l.Curvature.Bulge), mm(l.Curvature.Bulge, 0), l.Curvature.P)
}
