package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"gaugelog/analysis/report"
)

// reportOptions is what writeReport needs beside the run.
type reportOptions struct {
	format, output, units string
	beyond                bool
	progress              io.Writer
}

func reportCommand() *cobra.Command {
	var o reportOptions
	c := &cobra.Command{
		Use:     "report RUN",
		GroupID: "after",
		Short:   "Writes the report of a run",
		Long: `Writes the report of a run as one self-contained page with tables, plots and
cautions, to RUN/report/report.html unless --output names another place. What
lies in RUN/report/ can always be made again and is replaced.`,
		Example: "  gaugelog report runs/first --output slat.html",
		Args:    oneRun,
		RunE: func(cmd *cobra.Command, args []string) error {
			page, err := writeReport(args[0], o)
			if page != "" {
				fmt.Fprintln(cmd.OutOrStdout(), page)
			}
			return err
		},
	}
	c.Flags().StringVar(&o.format, "format", "html", "html")
	c.Flags().StringVar(&o.output, "output", "", "file to write (default RUN/report/report.html)")
	c.Flags().StringVar(&o.units, "units", "si", "units of the report: si or us")
	c.Flags().BoolVar(&o.beyond, "beyond", false, "forecast more than two decades of time beyond the data")
	return c
}

// writeReport analyses a run and writes its report; it returns where. A file
// named by output is not overwritten.
func writeReport(run string, o reportOptions) (string, error) {
	if o.format != "html" {
		return "", wrongf("give --format html", "format %q is not known", o.format)
	}
	if o.units == "" {
		o.units = "si"
	}
	if o.units != "si" && o.units != "us" {
		return "", wrongf("give --units si or --units us", "units %q are not known", o.units)
	}
	r, rig, err := analyseRun(run, o.beyond)
	if err != nil {
		return "", err
	}
	var page bytes.Buffer
	if err := report.HTML(&page, report.Build(r, report.Options{Rig: rig, Units: o.units})); err != nil {
		return "", err
	}
	path := o.output
	if path == "" {
		path = filepath.Join(run, "report", "report.html")
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
