package main

import (
	"errors"
	"fmt"
	"html/template"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"sort"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/sync/errgroup"

	"gaugelog/analysis/glance"
	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// rigRow is one run as `rigs` shows it.
type rigRow struct {
	Run        string   `json:"run"`
	Specimen   string   `json:"specimen"`
	State      string   `json:"state"` // recording, ended, broken off, not recorded here, empty or unreadable
	LastSeen   string   `json:"last_seen,omitempty"`
	Gauge      string   `json:"gauge,omitempty"`
	Sag        *float64 `json:"apparent_sag_mm"`
	SagLimit   *float64 `json:"sag_limit_mm"`
	Rate       *float64 `json:"apparent_rate_mm_per_day"`
	Step       string   `json:"step,omitempty"`
	DaysToGo   *float64 `json:"days_to_go"`
	Alarms     []string `json:"alarms"`
	Why        string   `json:"why,omitempty"` // unreadable: why
	lastSeenNs int64
}

func rigsCommand() *cobra.Command {
	var asJSON, replace bool
	var page string
	c := &cobra.Command{
		Use:     "rigs FOLDER...",
		GroupID: "run",
		Short:   "Shows how all runs stand at a glance",
		Long: `Lists the run folders given, and those found directly in the folders given: what
state each is in, when its last reading came, the sag and the rate of its creep
gauge, alarms that are raised and the days left in its plan. Only the ends of each
run are read, and of a run that has not grown since the last look nothing but what
was kept then in RUN/report. The sag is apparent: corrected for the gauge's sense and gain, not
for supports, offsets or temperature; "gaugelog analyse" gives the corrected one.
The rate is over the last day.`,
		Example: "  gaugelog rigs runs\n  gaugelog rigs runs --page rigs.html",
		Args:    cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			defer collectSeldom()()
			rows, err := lookAt(args)
			if err != nil {
				return err
			}
			if page != "" {
				return writeOut(cmd, page, replace, func(w io.Writer) error { return rigsPage.Execute(w, rows) })
			}
			if asJSON {
				return printJSON(cmd.OutOrStdout(), rows)
			}
			return printRigs(cmd.OutOrStdout(), rows)
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print as JSON")
	c.Flags().StringVar(&page, "page", "", "write one page of HTML to this file")
	c.Flags().BoolVar(&replace, "replace", false, "replace the page if it exists")
	return c
}

// lookAt sums up every run in the folders, in order of name.
func lookAt(folders []string) ([]rigRow, error) {
	var runs []string
	for _, f := range folders {
		if isRun(f) {
			runs = append(runs, f)
			continue
		}
		entries, err := os.ReadDir(f)
		if err != nil {
			return nil, wrong(err, "name a folder of runs")
		}
		for _, e := range entries {
			if p := filepath.Join(f, e.Name()); e.IsDir() && isRun(p) {
				runs = append(runs, p)
			}
		}
	}
	if len(runs) == 0 {
		return nil, wrongf("name a folder that holds runs", "there is no run folder in %s", strings.Join(folders, ", "))
	}
	sort.Strings(runs)
	rows := make([]rigRow, len(runs))
	var group errgroup.Group
	group.SetLimit(2 * runtime.GOMAXPROCS(0))
	for i, run := range runs {
		group.Go(func() error {
			if err := rows[i].look(run); err != nil {
				rows[i] = rigRow{Run: run, State: "unreadable", Why: err.Error(), Alarms: []string{}}
			}
			return nil
		})
	}
	return rows, group.Wait()
}

func isRun(dir string) bool {
	_, err := os.Stat(filepath.Join(dir, segment.RigFile))
	return err == nil
}

// look fills in the row of one run.
func (r *rigRow) look(run string) (err error) {
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, dir.Close()) }()
	s, err := glance.LookAgain(dir.FS(), func(rig, amendments []byte) (*config.Rig, error) {
		return glance.Rig(filepath.Join(run, segment.RigFile), rig, amendments)
	})
	if err != nil {
		return err
	}
	*r = rigRow{Run: run, Specimen: s.Specimen, Gauge: s.Gauge, Sag: s.SagMM, SagLimit: s.SagLimitMM,
		Rate: s.RateMMPerDay, Step: s.Step, DaysToGo: s.DaysToGo, Alarms: append([]string{}, s.Alarms...), lastSeenNs: s.Last}
	_, running, err := dir.Holder()
	switch {
	case err == nil && running:
		r.State = "recording"
	case s.Last == 0:
		r.State = "empty"
	case !s.Started:
		r.State = "not recorded here"
	case s.Ended:
		r.State = "ended"
	default:
		r.State = "broken off"
	}
	if s.Last != 0 {
		r.LastSeen = time.Unix(0, s.Last).UTC().Format(time.RFC3339)
	}
	return nil
}

func printRigs(w io.Writer, rows []rigRow) error {
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "run\tspecimen\tstate\tlast reading\tstep\tgauge\tsag mm\trate mm/d\tdays to go\talarms")
	for i := range rows {
		r := &rows[i]
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\n", r.Run, r.Specimen, r.State, r.LastSeen, r.Step, r.Gauge,
			r.SagText(), figure(r.Rate, "%+.3f"), figure(r.DaysToGo, "%.1f"), r.AlarmText())
	}
	return t.Flush()
}

func figure(v *float64, form string) string {
	if v == nil {
		return "-"
	}
	return fmt.Sprintf(form, *v)
}

// SagText is the sag with its limit.
func (r rigRow) SagText() string {
	s := figure(r.Sag, "%.3f")
	if r.SagLimit != nil {
		s += fmt.Sprintf(" of %g", *r.SagLimit)
	}
	return s
}

// RateText is the rate, mm/d.
func (r rigRow) RateText() string { return figure(r.Rate, "%+.3f") }

// DaysText is what is left of the plan.
func (r rigRow) DaysText() string { return figure(r.DaysToGo, "%.1f") }

// AlarmText is the alarms, or why the run could not be read.
func (r rigRow) AlarmText() string {
	if r.Why != "" {
		return r.Why
	}
	if len(r.Alarms) == 0 {
		return "none"
	}
	return strings.Join(r.Alarms, "; ")
}

// rigsPage is one self-contained page.
var rigsPage = template.Must(template.New("rigs").Parse(`<!doctype html>
<html lang="en"><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1">
<title>All rigs</title>
<style>body{font:16px/1.4 system-ui,sans-serif;margin:1.5rem;color:#111;background:#fff}table{border-collapse:collapse;width:100%}
th,td{text-align:left;padding:.35rem .6rem;border-bottom:1px solid #ccc}td.n{text-align:right;font-variant-numeric:tabular-nums}
tr.alarm td{background:#fde8e8}@media(prefers-color-scheme:dark){body{color:#eee;background:#151515}tr.alarm td{background:#4a1515}}</style>
<h1>All rigs</h1>
<p>Sags are apparent: corrected for sense and gain, not for supports, offsets or temperature. The rate is over the last day.
Suspended loads hurt people: this page is no safety device.</p>
<table><thead><tr><th>Run<th>Specimen<th>State<th>Last reading (UTC)<th>Step<th>Gauge<th>Sag, mm<th>Rate, mm/d<th>Days to go<th>Alarms</tr></thead><tbody>
{{range .}}<tr{{if or .Alarms .Why}} class="alarm"{{end}}><td>{{.Run}}<td>{{.Specimen}}<td>{{.State}}<td>{{.LastSeen}}<td>{{.Step}}<td>{{.Gauge}}<td class="n">{{.SagText}}<td class="n">{{.RateText}}<td class="n">{{.DaysText}}<td>{{.AlarmText}}</tr>
{{end}}</tbody></table></html>
`))
