package main

import (
	"context"
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
	Server   string   `json:"server,omitempty"` // where it is not a folder
	Run      string   `json:"run"`
	Specimen string   `json:"specimen"`
	State    string   `json:"state"` // recording, ended, broken off, not recorded here, empty, unreadable; on a server sending, silent, ended
	LastSeen string   `json:"last_seen,omitempty"`
	Gauge    string   `json:"gauge,omitempty"`
	Sag      *float64 `json:"apparent_sag_mm"`
	SagLimit *float64 `json:"sag_limit_mm"`
	Rate     *float64 `json:"apparent_rate_mm_per_day"`
	Step     string   `json:"step,omitempty"`
	DaysToGo *float64 `json:"days_to_go"`
	Alarms   []string `json:"alarms"`
	Why      string   `json:"why,omitempty"` // unreadable: why
	// SenseKnown is false where the sag is the size of a movement, whose sense
	// only a rig file tells.
	SenseKnown bool `json:"sense_known"`
}

// rigsFlags are the flags of `rigs`.
type rigsFlags struct {
	asJSON, replace, plain bool
	page, tokenFile        string
	rigs                   []string
}

func rigsCommand() *cobra.Command {
	var f rigsFlags
	c := &cobra.Command{
		Use:     "rigs URL|FOLDER...",
		GroupID: "run",
		Short:   "Shows how all runs stand at a glance",
		Long: `Lists the run folders given, and those found directly in the folders given: what
state each is in, when its last reading came, the sag and the rate of its creep
gauge, alarms that are raised and the days left in its plan. Only the ends of each
run are read, and of a run that has not grown since the last look nothing but what
was kept then in RUN/report. The sag is apparent: corrected for the gauge's sense and gain, not
for supports, offsets or temperature; "gaugelog analyse" gives the corrected one.
The rate is over the last day.

With the query address of a time-series server that runs are forwarded to, it lists
the runs there. State: "sending" where readings came in the last ten minutes, else
"silent", or "ended" where the recording said so. What "gaugelog forward" sent of the
rig file tells sense, limit and plan, where the server holds words (InfluxQL). One
that keeps numbers only (/api/v1/export) says that an alarm is raised and not which,
and knows no steps; --rig gives it rig files, by the specimen's name. Without a rig
file the sag is the size of the largest movement, marked with ±.`,
		Example: "  gaugelog rigs runs\n  gaugelog rigs runs --page rigs.html\n  gaugelog rigs 'http://lab:8086/query?db=sag'\n  gaugelog rigs 'http://lab:8428/api/v1/export' --rig a3.yaml --rig b1.yaml",
		Args:    cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			defer collectSeldom()()
			rows, err := lookAtAll(cmd.Context(), args, f)
			if err != nil {
				return err
			}
			if f.page != "" {
				return writeOut(cmd, f.page, f.replace, func(w io.Writer) error { return rigsPage.Execute(w, rows) })
			}
			if f.asJSON {
				return printJSON(cmd.OutOrStdout(), rows)
			}
			return printRigs(cmd.OutOrStdout(), rows)
		},
	}
	fl := c.Flags()
	fl.BoolVar(&f.asJSON, "json", false, "print as JSON")
	fl.StringVar(&f.page, "page", "", "write one page of HTML to this file")
	fl.BoolVar(&f.replace, "replace", false, "replace the page if it exists")
	fl.StringArrayVar(&f.rigs, "rig", nil, "with a server: a rig file; may be given several times")
	fl.StringVar(&f.tokenFile, "token-file", "", "with a server: file with the token, or user:password (default: the variable "+tokenVariable+")")
	fl.BoolVar(&f.plain, "plain", false, "with a server: allow a token over plain http to a host outside private networks")
	return c
}

// lookAtAll sums up the runs of folders, in order of name, then those of each
// server.
func lookAtAll(ctx context.Context, args []string, f rigsFlags) ([]rigRow, error) {
	var folders []string
	var rows []rigRow
	for _, a := range args {
		if strings.HasPrefix(a, "http://") || strings.HasPrefix(a, "https://") {
			more, err := askServer(ctx, a, f)
			if err != nil {
				return nil, err
			}
			rows = append(rows, more...)
		} else {
			folders = append(folders, a)
		}
	}
	if len(folders) == 0 {
		return rows, nil
	}
	of, err := lookAt(folders)
	return append(of, rows...), err
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
	*r = rigRow{Run: run, SenseKnown: true}
	r.fill(s)
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
	return nil
}

// fill takes over what a summary says.
func (r *rigRow) fill(s *glance.Summary) {
	r.Specimen, r.Gauge, r.Sag, r.SagLimit, r.Rate, r.Step, r.DaysToGo = s.Specimen, s.Gauge, s.SagMM, s.SagLimitMM, s.RateMMPerDay, s.Step, s.DaysToGo
	r.Alarms = append([]string{}, s.Alarms...)
	if s.Last != 0 {
		r.LastSeen = time.Unix(0, s.Last).UTC().Format(time.RFC3339)
	}
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
	if r.Sag != nil && !r.SenseKnown {
		s = "±" + s
	}
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
A ± stands before the size of a movement whose sense no rig file tells.
Suspended loads hurt people: this page is no safety device.</p>
<table><thead><tr><th>Run<th>Specimen<th>State<th>Last reading (UTC)<th>Step<th>Gauge<th>Sag, mm<th>Rate, mm/d<th>Days to go<th>Alarms</tr></thead><tbody>
{{range .}}<tr{{if or .Alarms .Why}} class="alarm"{{end}}><td>{{.Run}}<td>{{.Specimen}}<td>{{.State}}<td>{{.LastSeen}}<td>{{.Step}}<td>{{.Gauge}}<td class="n">{{.SagText}}<td class="n">{{.RateText}}<td class="n">{{.DaysText}}<td>{{.AlarmText}}</tr>
{{end}}</tbody></table></html>
`))
