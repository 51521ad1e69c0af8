package main

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis/calibrate"
	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
	"gaugelog/device"
)

// calibrateFlags are the flags of `calibrate`.
type calibrateFlags struct {
	gauge, csv, temperature, blockU, date, due, ports, settle, span, units string
	write, yes, asJSON                                                     bool
}

func calibrateCommand() *cobra.Command {
	var f calibrateFlags
	c := &cobra.Command{
		Use:     "calibrate RIG",
		GroupID: "prepare",
		Short:   "Works out a gauge's calibration line from gauge blocks",
		Long: `Takes a gauge through a set of gauge blocks, up and down, and works out its line
(indication = offset + gain * true) with the covariance of the two, the residuals,
hysteresis, repeatability, and whether a line is enough.

Without --csv the gauge itself is read: wring a block under the plunger, type its
length ("5 mm" or 5; 0 for the anvil) and wait for the answer. "u" takes the last
one back, "done" or the end of the input ends the session. Go up and then down,
ten points or more over the travel the test will use, in the attitude and with the
cable of the test.

--csv reads a session that was written down: block_mm, reading_mm and, where not
plain from the order, direction (up or down).

A difference between two readings does not carry the offset's uncertainty. --write
puts the line into the rig file with its date and due date, and keeps the raw
session as a CSV beside it; a live session is kept in any case.`,
		Example: "  gaugelog calibrate rig.yaml --gauge mid --csv blocks.csv --block-temperature 21.5C --write",
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return runCalibrate(cmd, args[0], f)
		},
	}
	fl := c.Flags()
	fl.StringVar(&f.gauge, "gauge", "", "the gauge's name in the rig file")
	fl.StringVar(&f.csv, "csv", "", "a session that was written down, instead of the gauge itself")
	fl.StringVar(&f.temperature, "block-temperature", "", "the blocks' temperature, such as 21.5C (default: as at 20 C)")
	fl.StringVar(&f.blockU, "block-u", "", "standard uncertainty of one block, such as 0.0002mm")
	fl.StringVar(&f.date, "date", "", "day of the session, YYYY-MM-DD (default: today)")
	fl.StringVar(&f.due, "due", "", "day it runs out, YYYY-MM-DD (default: a year later)")
	fl.StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the ports are, as `simulate` prints them")
	fl.StringVar(&f.settle, "settle", "1 s", "wait this long after a block was typed")
	fl.StringVar(&f.span, "average", "2 s", "then average over this long")
	fl.BoolVar(&f.write, "write", false, "put the calibration into the rig file")
	fl.BoolVar(&f.yes, "yes", false, "with --write: do not ask")
	fl.StringVar(&f.units, "units", "si", "units of the text: si or us")
	fl.BoolVar(&f.asJSON, "json", false, "print what was found as JSON")
	return c
}

func runCalibrate(cmd *cobra.Command, rigFile string, f calibrateFlags) error {
	if !slices.Contains(unitsystem.Names, f.units) {
		return wrongf("give --units si or --units us", "units %q are not known", f.units)
	}
	rig, file, err := openRig(rigFile)
	if err != nil {
		return err
	}
	alone, gauge, err := gaugeOf(rig, f.gauge)
	if err != nil {
		return err
	}
	date, due, err := datesOf(f.date, f.due, time.Now())
	if err != nil {
		return err
	}
	s, err := sessionOf(gauge, f)
	if err != nil {
		return err
	}
	lines := typed(cmd.Context(), cmd.InOrStdin())
	raw, kept := []byte(nil), ""
	if f.csv != "" {
		if raw, err = os.ReadFile(f.csv); err != nil {
			return wrong(err, "name a CSV file with block_mm, reading_mm and direction")
		}
		if s.Points, err = calibrate.ReadCSV(f.csv, bytes.NewReader(raw)); err != nil {
			return wrong(err, "the first line is: block_mm,reading_mm,direction")
		}
	} else {
		if s.Points, err = blocksLive(cmd, alone, gauge, lines, f); err != nil {
			return err
		}
		var b bytes.Buffer
		if err := calibrate.WriteCSV(&b, s.Points); err != nil {
			return err
		}
		raw = b.Bytes()
	}
	if len(s.Points) > 0 && (f.write || f.csv == "") {
		if kept, err = keepSession(rigFile, gauge.Name, date, raw); err != nil {
			return err
		}
		fmt.Fprintf(cmd.ErrOrStderr(), "the session is kept in %s\n", kept)
	}
	line, err := calibrate.Fit(s)
	if err != nil {
		return wrong(err, "take more blocks, up and down")
	}
	if err := tellCalibration(cmd.OutOrStdout(), f, gauge.Name, s, line, kept); err != nil || !f.write {
		return err
	}
	if err := putCalibration(file, gauge.Name, line, date, due); err != nil {
		return err
	}
	return file.write(cmd, lines, f.yes)
}

// sessionOf reads what the flags say of the blocks and the rig of the gauge.
func sessionOf(g config.Gauge, f calibrateFlags) (calibrate.Session, error) {
	s := calibrate.Session{Resolution: g.Resolution.Value}
	for _, t := range g.Travel {
		s.Travel = append(s.Travel, t.Value)
	}
	if f.temperature != "" {
		t, err := config.ParseTemperature(f.temperature)
		if err != nil {
			return s, wrong(fmt.Errorf("--block-temperature: %w", err), mendOf(err))
		}
		s.BlockCelsius = &t.Value
	}
	if f.blockU != "" {
		u, err := config.ParseLength(f.blockU)
		if err != nil {
			return s, wrong(fmt.Errorf("--block-u: %w", err), mendOf(err))
		}
		s.BlockU = u.Value
	}
	return s, nil
}

// datesOf is the day of the session and the day it runs out.
func datesOf(date, due string, now time.Time) (string, string, error) {
	day := now
	if date != "" {
		d, err := time.Parse(time.DateOnly, date)
		if err != nil {
			return "", "", wrongf("write YYYY-MM-DD", "--date %q is no day", date)
		}
		day = d
	}
	end := day.AddDate(1, 0, 0)
	if due != "" {
		d, err := time.Parse(time.DateOnly, due)
		if err != nil {
			return "", "", wrongf("write YYYY-MM-DD", "--due %q is no day", due)
		}
		end = d
	}
	from, to := day.Format(time.DateOnly), end.Format(time.DateOnly)
	if to <= from {
		return "", "", wrongf("give a later day", "the calibration of %s would run out on %s", from, to)
	}
	return from, to, nil
}

// blocksLive asks for blocks and reads the gauge over each.
func blocksLive(cmd *cobra.Command, alone *config.Rig, g config.Gauge, lines <-chan string, f calibrateFlags) (points []calibrate.Point, err error) {
	settle, err := spanFlag("settle", f.settle)
	if err != nil {
		return nil, err
	}
	span, err := spanFlag("average", f.span)
	if err != nil {
		return nil, err
	}
	opener, err := openerOf(f.ports)
	if err != nil {
		return nil, err
	}
	if g.Port == "" || g.Frame == "" {
		return nil, wrongf("add port: and frame: to the gauge, or give --csv", "gauge %s has no port or no frame, so it cannot be read", g.Name)
	}
	l, err := listenLive(cmd.Context(), alone, opener)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.close()) }()
	out := cmd.ErrOrStderr()
	fmt.Fprintf(out, "gauge %s on %s: type each block's length as it lies under the plunger; u takes back, done ends\n", g.Name, g.Port)
	for {
		select {
		case <-cmd.Context().Done():
			return points, nil
		case text, open := <-lines:
			if !open || text == "done" {
				return points, nil
			}
			points, err = oneBlock(cmd, l, points, text, f.units, settle, span)
			if err != nil {
				return points, err
			}
		}
	}
}

// oneBlock deals with one line that was typed.
func oneBlock(cmd *cobra.Command, l *live, points []calibrate.Point, text, units string, settle, span time.Duration) ([]calibrate.Point, error) {
	out := cmd.ErrOrStderr()
	switch text {
	case "":
		return points, nil
	case "u":
		if len(points) == 0 {
			fmt.Fprintln(out, "there is nothing to take back")
			return points, nil
		}
		last := points[len(points)-1]
		fmt.Fprintln(out, unitsystem.Text(units, fmt.Sprintf("took back the block of %g\u202fmm", last.BlockMM)))
		return points[:len(points)-1], nil
	}
	if v, err := strconv.ParseFloat(text, 64); err == nil {
		text = strconv.FormatFloat(v, 'f', -1, 64) + " mm"
	}
	block, err := config.ParseLength(text)
	if err != nil || block.Value < 0 {
		fmt.Fprintf(out, "%q is no block's length; type such as 5 or 5 mm\n", text)
		return points, nil
	}
	mm, n, err := l.average(cmd.Context(), out, settle, span, 15*time.Second)
	if err != nil {
		if cmd.Context().Err() != nil {
			return points, nil
		}
		fmt.Fprintf(out, "%v: look at cable and gauge, then type the block again\n", err)
		return points, nil
	}
	mm = math.Round(mm*1e7) / 1e7 // 0.1 nm: sums leave no tail of digits
	points = append(points, calibrate.Point{BlockMM: block.Value, ReadingMM: mm, Time: time.Now().UTC().Format(time.RFC3339)})
	calibrate.AddDirections(points)
	p := points[len(points)-1]
	fmt.Fprintln(out, unitsystem.Text(units, fmt.Sprintf("%d: block %g\u202fmm, %s: %.4f\u202fmm (mean of %d)", len(points), p.BlockMM, p.Direction, p.ReadingMM, n)))
	return points, nil
}

// keepSession writes the raw session beside the rig file, under a free name.
func keepSession(rigFile, gauge, date string, raw []byte) (string, error) {
	base := filepath.Join(filepath.Dir(rigFile), "calibration-"+gauge+"-"+date)
	for n := 1; ; n++ {
		name := base + ".csv"
		if n > 1 {
			name = fmt.Sprintf("%s-%d.csv", base, n)
		}
		f, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
		if errors.Is(err, fs.ErrExist) {
			if has, err := os.ReadFile(name); err == nil && bytes.Equal(has, raw) {
				return name, nil
			}
			continue
		}
		if err != nil {
			return "", err
		}
		_, err = f.Write(raw)
		if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
			return "", errors.Join(err, os.Remove(name))
		}
		return name, nil
	}
}

// putCalibration splices the line into the rig file's text.
func putCalibration(file *splicing, gauge string, l *calibrate.Line, date, due string) error {
	fixed := func(v float64, digits int) string { return strconv.FormatFloat(v, 'f', digits, 64) }
	for _, v := range []struct{ key, value string }{
		{"offset", fixed(l.Offset, 6) + " mm"}, {"gain", fixed(l.Gain, 7)},
		{"u_offset", fixed(math.Max(l.UOffset, 1e-6), 6) + " mm"}, {"u_gain", fixed(math.Max(l.UGain, 1e-7), 7)},
		{"correlation", fixed(l.Correlation, 4)}, {"date", date}, {"due", due},
	} {
		if err := file.put("gauges["+gauge+"].calibration."+v.key, v.value); err != nil {
			return err
		}
	}
	return nil
}

// calibrated is what `calibrate --json` prints.
type calibrated struct {
	Gauge   string            `json:"gauge"`
	Points  []calibrate.Point `json:"points"`
	Line    *calibrate.Line   `json:"line"`
	Session string            `json:"session,omitempty"`
}

var _ device.Sink = (*live)(nil)
