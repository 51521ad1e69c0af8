package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path"
	"path/filepath"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis/stiffness"
	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// markFlags are the flags of `mark`.
type markFlags struct {
	when, by, step, gauge, act, note, photo, withdraw, why string
	list, asJSON                                           bool
}

func markCommand() *cobra.Command {
	var f markFlags
	c := &cobra.Command{
		Use:     "mark RUN [LOAD VALUE ...]",
		GroupID: "run",
		Short:   "Enters what was done at the rig: loads, acts on gauges, notes",
		Long: `Enters a dated mark into a run, also while another program records it. A load's
value holds from that instant on; "0 kg" takes it off. The mark is on disk before
the command answers. Being late does no harm: the analysis finds the true instant
in the readings. A mark is never edited; a wrong one is withdrawn by its id.

--when takes 2026-03-02T08:05:00Z, "2026-03-02 08:05", 08:05 (today, in the rig's
time zone) or how long ago it was, such as "3 min".`,
		Example: `  gaugelog mark runs/first pan 12.40kg
  gaugelog mark runs/first --step l1
  gaugelog mark runs/first --gauge mid --act zeroed --when "2 min"
  gaugelog mark runs/first --withdraw m3 --why "wrong pan"`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := needRun(args[0]); err != nil {
				return err
			}
			return runMark(cmd, args[0], args[1:], f)
		},
		ValidArgsFunction: completeLoads,
	}
	fl := c.Flags()
	fl.StringVar(&f.when, "when", "", "when it happened (default: now)")
	fl.StringVar(&f.by, "by", "", "who enters it")
	fl.StringVar(&f.step, "step", "", "the step that begins; a planned one sets its loads")
	fl.StringVar(&f.gauge, "gauge", "", "the gauge something was done to")
	fl.StringVar(&f.act, "act", "", "what was done to it: "+strings.Join(ingest.Acts, ", "))
	fl.StringVar(&f.note, "note", "", "free text")
	fl.StringVar(&f.photo, "photo", "", "a picture to keep with the note")
	fl.StringVar(&f.withdraw, "withdraw", "", "the id of a mark that does not count")
	fl.StringVar(&f.why, "why", "", "why it is withdrawn")
	fl.BoolVar(&f.list, "list", false, "list the marks")
	fl.BoolVar(&f.asJSON, "json", false, "with --list: as JSON")
	return c
}

func runMark(cmd *cobra.Command, run string, values []string, f markFlags) error {
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return err
	}
	defer dir.Close()
	if f.list {
		return listMarks(cmd.OutOrStdout(), dir.FS(), f.asJSON)
	}
	rig, err := config.LoadRig(filepath.Join(run, "rig.yaml"))
	if err != nil {
		return err
	}
	m, err := markOf(rig, values, f)
	if err != nil {
		return err
	}
	if f.photo != "" {
		if m.Photo, err = keepPhoto(dir.FS(), f.photo); err != nil {
			return err
		}
	}
	id, err := dir.AppendMark(m, ingest.SystemClock{})
	if err != nil {
		return wrong(err, "")
	}
	if id == "" {
		id = "withdrew " + f.withdraw
	}
	fmt.Fprintln(cmd.OutOrStdout(), id)
	return nil
}

// markOf builds the mark from arguments and flags.
func markOf(rig *config.Rig, values []string, f markFlags) (ingest.Mark, error) {
	m := ingest.Mark{By: f.by, Step: f.step, Gauge: f.gauge, Act: f.act, Note: f.note, Withdraw: f.withdraw, Why: f.why}
	if f.photo != "" && m.Note == "" {
		m.Note = "photograph"
	}
	if f.gauge != "" && !hasGauge(rig, f.gauge) {
		return m, wrongf("use one of the rig file's names", "the rig has no gauge %s", f.gauge)
	}
	at, err := parseWhen(f.when, rig.Timezone, time.Now())
	if err != nil {
		return m, err
	}
	m.Time = at
	g, _, err := stiffness.GravityOf(rig.Gravity)
	if err != nil {
		return m, err
	}
	if len(values)%2 != 0 {
		return m, wrongf("give pairs, such as: pan 12.40kg", "load %s has no value", values[len(values)-1])
	}
	for i := 0; i < len(values); i += 2 {
		w, err := config.ParseWeight(values[i+1])
		if err != nil {
			return m, wrong(fmt.Errorf("load %s: %w", values[i], err), mendOf(err))
		}
		v, err := loadValue(rig, values[i], w, g.Value)
		if err != nil {
			return m, err
		}
		m.Loads = append(m.Loads, v)
	}
	if f.step != "" && len(values) == 0 {
		return m, planned(rig, &m, g.Value)
	}
	return m, nil
}

// planned sets the loads of a step that the plan knows.
func planned(rig *config.Rig, m *ingest.Mark, gravity float64) error {
	for _, p := range rig.Plan {
		if p.Step != m.Step {
			continue
		}
		for _, s := range p.Set {
			v, err := loadValue(rig, s.Load, s.Weight, gravity)
			if err != nil {
				return err
			}
			m.Loads = append(m.Loads, v)
		}
	}
	return nil
}

func loadValue(rig *config.Rig, name string, w config.Weight, gravity float64) (ingest.LoadValue, error) {
	var names []string
	for _, l := range rig.Loads {
		names = append(names, l.Name)
		if l.Name != name {
			continue
		}
		v := ingest.LoadValue{Name: name, Shown: w.Shown}
		if w.Mass != nil {
			kg := w.Mass.Value
			v.Kilogram, v.Newton = &kg, kg*gravity
		} else {
			v.Newton = w.Force.Value
		}
		return v, nil
	}
	return ingest.LoadValue{}, wrongf("its loads are: "+strings.Join(names, ", "), "the rig has no load %s", name)
}

func hasGauge(rig *config.Rig, name string) bool {
	for _, g := range rig.Gauges {
		if g.Name == name {
			return true
		}
	}
	return false
}

// parseWhen reads --when; 0 means now.
func parseWhen(text, zone string, now time.Time) (int64, error) {
	if text == "" {
		return 0, nil
	}
	loc, err := time.LoadLocation(zone)
	if err != nil {
		loc = time.UTC
	}
	if t, err := time.Parse(time.RFC3339Nano, text); err == nil {
		return t.UnixNano(), nil
	}
	for _, layout := range []string{"2006-01-02 15:04:05", "2006-01-02 15:04"} {
		if t, err := time.ParseInLocation(layout, text, loc); err == nil {
			return t.UnixNano(), nil
		}
	}
	for _, layout := range []string{"15:04:05", "15:04"} {
		if t, err := time.Parse(layout, text); err == nil {
			y, mo, d := now.In(loc).Date()
			return time.Date(y, mo, d, t.Hour(), t.Minute(), t.Second(), 0, loc).UnixNano(), nil
		}
	}
	if d, err := config.ParseDuration(strings.TrimSpace(strings.TrimSuffix(text, "ago"))); err == nil {
		return now.Add(-time.Duration(d.Value * float64(time.Second))).UnixNano(), nil
	}
	return 0, wrongf(`write 2026-03-02T08:05:00Z, "2026-03-02 08:05", 08:05 or "3 min" (ago)`, "--when %q is no time", text)
}

// keepPhoto copies a picture into the run under a name that is free.
func keepPhoto(fsys segment.FS, from string) (string, error) {
	b, err := os.ReadFile(from)
	if err != nil {
		return "", wrong(err, "name a picture that exists")
	}
	if err := fsys.MkdirAll("photos"); err != nil {
		return "", err
	}
	ext := strings.ToLower(path.Ext(from))
	for n := 1; ; n++ {
		name := fmt.Sprintf("photos/%04d%s", n, ext)
		f, err := fsys.Create(name)
		if os.IsExist(err) {
			continue
		}
		if err != nil {
			return "", err
		}
		if _, err := io.Copy(f, bytes.NewReader(b)); err != nil {
			f.Close()
			return "", err
		}
		if err := f.Sync(); err != nil {
			f.Close()
			return "", err
		}
		return name, f.Close()
	}
}

func listMarks(w io.Writer, fsys segment.FS, asJSON bool) error {
	marks, err := ingest.ListMarks(fsys)
	if err != nil {
		return err
	}
	if asJSON {
		if marks == nil {
			marks = []ingest.Mark{}
		}
		return printJSON(w, marks)
	}
	gone := ingest.Withdrawn(marks)
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', 0)
	fmt.Fprintln(t, "id\ttime\twhat\tby\t")
	for _, m := range marks {
		if m.Withdraw != "" {
			continue
		}
		state := ""
		if why, yes := gone[m.ID]; yes {
			state = "withdrawn: " + why
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\n", m.ID, time.Unix(0, m.Time).UTC().Format("2006-01-02 15:04:05Z"), markWords(m), m.By, state)
	}
	return t.Flush()
}

func markWords(m ingest.Mark) string {
	var parts []string
	if m.Step != "" {
		parts = append(parts, "step "+m.Step+":")
	}
	for _, l := range m.Loads {
		parts = append(parts, l.Name+" "+l.Shown)
	}
	if m.Act != "" {
		parts = append(parts, "gauge "+m.Gauge+" "+m.Act)
	}
	if m.Note != "" {
		parts = append(parts, m.Note)
	}
	return strings.Join(parts, " ")
}

// completeLoads offers the rig's loads after the run.
func completeLoads(_ *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
	if len(args) == 0 {
		return nil, cobra.ShellCompDirectiveFilterDirs
	}
	rig, err := config.LoadRig(filepath.Join(args[0], "rig.yaml"))
	if err != nil || len(args)%2 == 0 {
		return nil, cobra.ShellCompDirectiveNoFileComp
	}
	var names []string
	for _, l := range rig.Loads {
		names = append(names, l.Name)
	}
	return names, cobra.ShellCompDirectiveNoFileComp
}
