package main

import (
	"bytes"
	"cmp"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis"
	"gaugelog/analysis/history"
	"gaugelog/analysis/report"
	"gaugelog/analysis/unitsystem"
	"gaugelog/ingest"
)

// reportFormats are what --format takes.
var reportFormats = []string{"html", "pdf", "md", "json", "csv"}

// reportOptions is what writeReport needs beside the run.
type reportOptions struct {
	howToAnalyse
	format, output, units, paper string
}

func reportCommand() *cobra.Command {
	var o reportOptions
	var from fromFlags
	c := &cobra.Command{
		Use:     "report RUN",
		GroupID: "after",
		Short:   "Writes the report of a run",
		Long: `Writes the report of a run with tables, plots and cautions, to
RUN/report/report.html (or .pdf and so on) unless --output names another place.
What lies in RUN/report/ can always be made again and is replaced.

  html   one self-contained page, for screens of any size and for print
  pdf    for print, on A4 or Letter; not tagged for those who listen: take html
  md     Markdown, plots by their captions
  json   the result as ` + "`analyse --json`" + ` prints it
  csv    the tables, one block each, for spreadsheets

` + fromWords + ` The report is then
written to --output, else to report.html (or .pdf and so on) here.`,
		Example: "  gaugelog report runs/first --format pdf --paper letter\n  gaugelog report runs/first --output slat.html",
		Args:    from.args,
		RunE: func(cmd *cobra.Command, args []string) error {
			o.progress = cmd.ErrOrStderr()
			defer collectSeldom()()
			if from.from != "" && from.keep == "" && o.output == "" {
				o.output = "report." + o.format // the folder does not stay
			}
			return from.on(cmd, args, func(run string) error {
				page, err := writeReport(cmd.Context(), run, o)
				if page != "" {
					fmt.Fprintln(cmd.OutOrStdout(), page)
				}
				return err
			})
		},
	}
	c.Flags().StringVar(&o.format, "format", "html", "html, pdf, md, json or csv")
	c.Flags().StringVar(&o.paper, "paper", "a4", "paper of a pdf: a4 or letter")
	c.Flags().StringVar(&o.output, "output", "", "file to write (default RUN/report/report.html)")
	c.Flags().StringVar(&o.units, "units", "si", "units of the report: si or us")
	o.flags(c)
	from.add(c.Flags())
	return c
}

// writeReport analyses a run and writes its report; it returns where. A file
// named by output is not overwritten.
func writeReport(ctx context.Context, run string, o reportOptions) (string, error) {
	if !slices.Contains(reportFormats, o.format) {
		return "", wrongf("give --format "+strings.Join(reportFormats, ", "), "format %q is not known", o.format)
	}
	o.units, o.paper = cmp.Or(o.units, "si"), cmp.Or(o.paper, "a4")
	if o.units != "si" && o.units != "us" {
		return "", wrongf("give --units si or --units us", "units %q are not known", o.units)
	}
	if !slices.Contains(report.Papers, o.paper) {
		return "", wrongf("give --paper a4 or --paper letter", "paper %q is not known", o.paper)
	}
	r, opt, err := readRun(ctx, run, o.howToAnalyse)
	if err != nil {
		return "", err
	}
	opt.Units = o.units
	var page bytes.Buffer
	if o.format == "json" {
		err = printJSON(&page, r)
	} else {
		err = report.Write(&page, report.Build(r, opt), o.format, o.paper)
	}
	if err != nil {
		return "", err
	}
	path := o.output
	if path == "" {
		path = filepath.Join(run, "report", "report."+o.format)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			return "", err
		}
	} else if _, err := os.Stat(path); err == nil {
		return "", wrongf("give another name, or remove it first", "%s exists already", path)
	}
	if err := replaceFile(path, page.Bytes()); err != nil {
		return "", err
	}
	return path, held(r)
}

// readRun analyses a run and gathers what its report shows beside the result.
func readRun(ctx context.Context, run string, how howToAnalyse) (*analysis.Result, report.Options, error) {
	var o report.Options
	h, r, err := evaluateRun(ctx, run, how)
	if err != nil {
		return nil, o, err
	}
	o.Rig, o.Amendments, o.Files = h.Rig, h.Amendments, os.DirFS(run)
	o.Events = eventsOf(h)
	o.Marks, err = marksOf(run)
	return r, o, err
}

func eventsOf(h *history.History) []report.Event {
	var out []report.Event
	for _, e := range h.Events {
		out = append(out, report.Event{Time: time.Unix(0, e.Time), Kind: e.Kind, Gauge: e.Gauge, Detail: e.Detail})
	}
	return out
}

// marksOf lists a run's marks, withdrawn ones among them.
func marksOf(run string) ([]report.Mark, error) {
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return nil, err
	}
	defer dir.Close()
	marks, err := ingest.ListMarks(dir.FS())
	if err != nil {
		return nil, wrongInput(err)
	}
	gone := ingest.Withdrawn(marks)
	var out []report.Mark
	for _, m := range marks {
		if m.Withdraw != "" {
			continue
		}
		for i := range m.Loads {
			m.Loads[i].Shown = unitsystem.Typed(m.Loads[i].Shown)
		}
		out = append(out, report.Mark{ID: m.ID, Time: time.Unix(0, m.Time), What: markWords(m), By: m.By, Withdrawn: gone[m.ID], Photo: m.Photo})
	}
	return out, nil
}

// replaceFile writes a file whole or not at all.
func replaceFile(path string, b []byte) error {
	f, err := os.CreateTemp(filepath.Dir(path), ".writing-*")
	if err != nil {
		return err
	}
	_, err = f.Write(b)
	err = errors.Join(err, f.Chmod(0o644), f.Close())
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		return errors.Join(err, os.Remove(f.Name()))
	}
	return nil
}
