package main

import (
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"gaugelog/analysis/stiffness"
	"gaugelog/config"
	"gaugelog/ingest/importer"
)

// importFlags are the flags of `import`.
type importFlags struct {
	into, mapFile, marks                 string
	time, gauges, loads, temps, humidity []string
	m                                    importer.Mapping
	sort                                 bool
}

func importCommand() *cobra.Command {
	var f importFlags
	c := &cobra.Command{
		Use:     "import RIG CSV",
		GroupID: "after",
		Short:   "Makes a run of readings taken by hand or by another program",
		Long: `Makes a run folder of a table of readings (CSV, UTF-8), which then analyses like
any other. A hand-read ruler or dial is welcome: a column of times and a column
for each gauge, named as in the rig file with the unit behind it ("mid [mm]"), need
no flag. Other columns are named by --time, --gauge, --load, --temperature and
--humidity, or in a file with --map, whose keys are those flags' names. Values may
be decimal (a decimal comma too) or, as read from a ruler, 1 3/8. What
"gaugelog export" wrote comes back as it is.

Times may be 2026-03-02 08:05, 2026-03-02T08:05:00Z, 2.3.2026 08:05, a count since
1970, or elapsed time with --start. Loads stand in columns or in a table of marks
(columns time, load, value, step, gauge, act, note, by).

A row that cannot be placed is refused with its number; then nothing is imported.`,
		Example: `  gaugelog import rig.yaml sheet.csv --into runs/old
  gaugelog import rig.yaml sheet.csv --into runs/old --time Date --time Time --gauge mid="Reading" --unit in --dates day-first
  gaugelog import rig.yaml sheet.csv --into runs/old --marks loads.csv`,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) != 2 {
				return wrongf("give both: "+cmd.UseLine(), "import takes a rig file and a CSV, %d arguments were given", len(args))
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error { return runImport(cmd, args[0], args[1], f) },
	}
	fl := c.Flags()
	fl.StringVar(&f.into, "into", "", "the run folder to make")
	fl.StringVar(&f.mapFile, "map", "", "a file that says which column is what")
	fl.StringArrayVar(&f.time, "time", nil, "the column of times; twice for a date and a time of day")
	fl.StringArrayVar(&f.gauges, "gauge", nil, "NAME=COLUMN of a gauge")
	fl.StringArrayVar(&f.loads, "load", nil, "NAME=COLUMN of a load's value")
	fl.StringArrayVar(&f.temps, "temperature", nil, "NAME=COLUMN of a probe's temperature, degree Celsius")
	fl.StringArrayVar(&f.humidity, "humidity", nil, "NAME=COLUMN of a probe's humidity, percent")
	fl.StringVar(&f.m.Unit, "unit", "", "unit of the gauges' columns that name none: mm, cm, um or in")
	fl.StringVar(&f.m.LoadUnit, "load-unit", "", "unit of the loads' columns that name none, such as kg")
	fl.StringVar(&f.m.Start, "start", "", "the instant of 0 where the times are elapsed")
	fl.StringVar(&f.m.Zone, "zone", "", "time zone of times that name none (default: the rig's)")
	fl.StringVar(&f.m.Dates, "dates", "", "day-first or month-first, for dates such as 03/04/2026")
	fl.StringVar(&f.m.Decimal, "decimal", "", "comma or point (default: a comma where it does not separate the columns)")
	fl.StringArrayVar(&f.m.Missing, "missing", nil, "a text that stands for no reading; an empty cell always does")
	fl.StringVar(&f.marks, "marks", "", "a CSV of marks")
	fl.BoolVar(&f.sort, "sort", false, "put rows that are in another order in order of time")
	return c
}

func runImport(cmd *cobra.Command, rigFile, table string, f importFlags) error {
	if f.into == "" {
		return wrongf("give --into RUN, the folder to make", "no folder was given")
	}
	text, err := os.ReadFile(rigFile)
	if err != nil {
		return wrong(err, "name a rig file; `gaugelog new` writes one")
	}
	rig, err := config.Parse(rigFile, text)
	if err != nil {
		return err
	}
	o := importer.Options{Rig: rig, RigBytes: text, File: table, Sort: f.sort, Program: strings.ReplaceAll(version(), " ", "-")}
	if o.Mapping, err = f.mapping(); err != nil {
		return err
	}
	g, _, err := stiffness.GravityOf(rig.Gravity)
	if err != nil {
		return err
	}
	o.Gravity = g.Value
	file, err := os.Open(table)
	if err != nil {
		return wrong(err, "name a CSV of readings")
	}
	defer file.Close()
	bar, err := watched(cmd, file)
	if err != nil {
		return err
	}
	o.Table = bar
	if f.marks != "" {
		marks, err := os.Open(f.marks)
		if err != nil {
			return wrong(err, "name a CSV of marks")
		}
		defer marks.Close()
		o.Marks, o.MarksFile = marks, f.marks
	}
	stop := working(cmd.ErrOrStderr(), "importing "+table, -1, nil)
	s, err := importer.Import(f.into, o)
	stop()
	if err != nil {
		return err
	}
	for _, c := range s.Ignored {
		fmt.Fprintf(cmd.ErrOrStderr(), "column %q was left out\n", c)
	}
	fmt.Fprintf(cmd.OutOrStdout(), "made %s: %d readings and %d marks from %d rows\n", f.into, s.Readings, s.Marks, s.Rows)
	return nil
}

// mapping joins the map file and the flags; a flag goes before the file.
func (f *importFlags) mapping() (importer.Mapping, error) {
	m := importer.Mapping{}
	if f.mapFile != "" {
		text, err := os.ReadFile(f.mapFile)
		if err != nil {
			return m, wrong(err, "name a mapping file")
		}
		if m, err = importer.ParseMapping(f.mapFile, text); err != nil {
			return m, err
		}
	}
	if len(f.time) > 0 {
		m.Time = f.time
	}
	for _, over := range []struct{ to, from *string }{{&m.Unit, &f.m.Unit}, {&m.LoadUnit, &f.m.LoadUnit},
		{&m.Start, &f.m.Start}, {&m.Zone, &f.m.Zone}, {&m.Dates, &f.m.Dates}, {&m.Decimal, &f.m.Decimal}} {
		if *over.from != "" {
			*over.to = *over.from
		}
	}
	m.Missing = append(m.Missing, f.m.Missing...)
	if m.Gauges == nil {
		m.Gauges = map[string]string{}
	}
	if m.Loads == nil {
		m.Loads = map[string]string{}
	}
	if m.Probes == nil {
		m.Probes = map[string]importer.Probe{}
	}
	put := func(flag string, pairs []string, to func(name, column string)) error {
		for _, p := range pairs {
			name, column, ok := strings.Cut(p, "=")
			if !ok || name == "" || column == "" {
				return wrongf(`write --`+flag+` NAME="COLUMN"`, "--%s %q is no name with a column", flag, p)
			}
			to(name, column)
		}
		return nil
	}
	for _, err := range []error{
		put("gauge", f.gauges, func(n, c string) { m.Gauges[n] = c }),
		put("load", f.loads, func(n, c string) { m.Loads[n] = c }),
		put("temperature", f.temps, func(n, c string) { p := m.Probes[n]; p.Temperature = c; m.Probes[n] = p }),
		put("humidity", f.humidity, func(n, c string) { p := m.Probes[n]; p.Humidity = c; m.Probes[n] = p }),
	} {
		if err != nil {
			return m, err
		}
	}
	return m, nil
}

// watchedFile shows how far a file was read.
type watchedFile struct {
	io.ReadSeeker
	done, all int64
	show      func(done, all int64)
}

func watched(cmd *cobra.Command, f *os.File) (*watchedFile, error) {
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	return &watchedFile{ReadSeeker: f, all: 2 * info.Size(), show: slowProgress(cmd.ErrOrStderr(), "importing")}, nil
}

func (w *watchedFile) Read(p []byte) (int, error) {
	n, err := w.ReadSeeker.Read(p)
	w.done += int64(n)
	w.show(w.done, w.all)
	return n, err
}
