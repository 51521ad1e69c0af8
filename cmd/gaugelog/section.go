package main

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/analysis/section"
	"gaugelog/analysis/unitsystem"
	"gaugelog/config"
	"gaugelog/device"
)

// sectionFlags are the flags of `section`.
type sectionFlags struct {
	port, frame, ports, units string
	dryRun, yes               bool
	asJSON                    bool
}

func sectionCommand() *cobra.Command {
	var f sectionFlags
	c := &cobra.Command{
		Use:     "section RIG",
		GroupID: "prepare",
		Short:   "Takes the specimen's width and depth from a caliper into the rig file",
		Long: `Takes the section's dimensions at several places along the specimen, from the
send button of a caliper (--port and --frame) or typed, such as "37.95 mm" or
37.95. It shows mean, range and what they do to the modulus, which goes with
1/(width * depth^3), and writes them into the rig file.

A place far from the others is questioned at once: measure it again, or type "k"
to keep it. "u" takes the last one back, "next" or an empty line goes on to the
next dimension, "done" or the end of the input ends. A caliper whose frame does not
say "button: true" is read when Enter is pressed on an empty line; "next" goes on.`,
		Example: "  gaugelog section rig.yaml --port usb:0403:6001:C7 --frame caliper",
		Args:    cobra.ExactArgs(1),
		RunE:    func(cmd *cobra.Command, args []string) error { return runSection(cmd, args[0], f) },
	}
	fl := c.Flags()
	fl.StringVar(&f.port, "port", "", "the caliper's port")
	fl.StringVar(&f.frame, "frame", "", "the caliper's frame, of the rig file or built in")
	fl.StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the ports are, as `simulate` prints them")
	fl.BoolVar(&f.dryRun, "dry-run", false, "show what would be written, and write nothing")
	fl.BoolVar(&f.yes, "yes", false, "do not ask before writing")
	fl.StringVar(&f.units, "units", "si", "units of the text: si or us")
	fl.BoolVar(&f.asJSON, "json", false, "print what was found as JSON")
	return c
}

func runSection(cmd *cobra.Command, rigFile string, f sectionFlags) (err error) {
	if !slices.Contains(unitsystem.Names, f.units) {
		return wrongf("give --units si or --units us", "units %q are not known", f.units)
	}
	rig, file, err := openRig(rigFile)
	if err != nil {
		return err
	}
	s, err := section.New(rig.Specimen.Section)
	if err != nil {
		return wrong(err, "write second_moment by hand, or another shape")
	}
	t := &sectionTalk{s: s, units: f.units, out: cmd.ErrOrStderr(), lines: typed(cmd.Context(), cmd.InOrStdin())}
	if f.port != "" || f.frame != "" {
		l, err := caliperOn(cmd, rig, f, t)
		if err != nil {
			return err
		}
		t.live = l
		defer func() { err = errors.Join(err, l.close()) }()
	}
	if err := t.run(cmd); err != nil {
		return err
	}
	r, err := s.Finish()
	if err != nil {
		return wrong(err, "nothing was written; measure what is missing")
	}
	if f.asJSON {
		err = printJSON(cmd.OutOrStdout(), r)
	} else {
		err = tellSection(cmd.OutOrStdout(), f.units, r)
	}
	if err != nil {
		return err
	}
	for _, name := range s.Names() {
		if err := file.putList("specimen.section."+name, s.Words(name)); err != nil {
			return err
		}
	}
	if f.dryRun {
		for _, l := range file.changed() {
			fmt.Fprintln(cmd.ErrOrStderr(), l)
		}
		return nil
	}
	return file.write(cmd, t.lines, f.yes)
}

// caliperOn opens the caliper as a rig of one gauge.
func caliperOn(cmd *cobra.Command, rig *config.Rig, f sectionFlags, t *sectionTalk) (*live, error) {
	if f.port == "" || f.frame == "" {
		return nil, wrongf("give both --port and --frame, or neither and type the places", "a caliper needs a port and a frame")
	}
	frame, ok := rig.FrameOf(f.frame)
	if !ok {
		return nil, wrongf("describe it under frames: in the rig file; `gaugelog listen PORT --guess` proposes one", "no frame is called %q", f.frame)
	}
	opener, err := openerOf(f.ports)
	if err != nil {
		return nil, err
	}
	one := *rig
	one.Probes, one.Frames = nil, append([]config.Frame{frame}, rig.Frames...)
	resolution, err := config.ParseLength("0.01 mm")
	if err != nil {
		return nil, err
	}
	one.Gauges = []config.Gauge{{Name: "caliper", Port: f.port, Frame: f.frame, Sense: "down", Resolution: resolution}}
	t.button = frame.Button
	return listenLive(cmd.Context(), &one, opener)
}

// sectionTalk is the conversation of one session.
type sectionTalk struct {
	s      *section.Session
	units  string // of what is asked and told
	out    io.Writer
	lines  <-chan string
	live   *live // nil: everything is typed
	button bool  // each reading is a press
}

func (t *sectionTalk) run(cmd *cobra.Command) error {
	t.prompt()
	var readings <-chan device.Reading
	if t.live != nil && t.button {
		readings = t.live.readings
	}
	for {
		select {
		case <-cmd.Context().Done():
			return failed(errors.New("ended before all was measured; nothing was written"), "run it again")
		case r := <-readings:
			t.pressed(r)
		case text, open := <-t.lines:
			if !open || text == "done" {
				return nil
			}
			t.typed(cmd, text)
		}
	}
}

func (t *sectionTalk) prompt() {
	fmt.Fprintf(t.out, "%s, at several places along the specimen:\n", t.s.Dimension())
}

// pressed takes what a button sent.
func (t *sectionTalk) pressed(r device.Reading) {
	if r.Kind != device.Indication {
		if w := troubleWords(r); w != "" {
			fmt.Fprintln(t.out, w)
		}
		return
	}
	t.take(section.Place{MM: r.MM, Shown: strconv.FormatFloat(r.Shown, 'f', -1, 64) + " " + r.Unit})
}

// typed deals with a line.
func (t *sectionTalk) typed(cmd *cobra.Command, text string) {
	switch {
	case text == "u":
		if p, ok := t.s.Back(); ok {
			fmt.Fprintf(t.out, "took back %s\n", p.Shown)
			t.prompt()
		} else {
			fmt.Fprintln(t.out, "there is nothing to take back")
		}
	case text == "k":
		if err := t.s.Keep(); err != nil {
			fmt.Fprintln(t.out, err)
		} else {
			fmt.Fprintln(t.out, "kept")
		}
	case text == "" && t.live != nil && !t.button:
		mm, n, err := t.live.average(cmd.Context(), t.out, 0, 300*time.Millisecond, 5*time.Second)
		if err != nil {
			fmt.Fprintf(t.out, "%v: look at the caliper's cable\n", err)
			return
		}
		fmt.Fprintf(t.out, "mean of %d: ", n)
		t.take(section.Place{MM: mm, Shown: strconv.FormatFloat(mm, 'f', 3, 64) + " mm"})
	case text == "" || text == "next":
		more, err := t.s.Next()
		switch {
		case err != nil:
			fmt.Fprintln(t.out, err)
		case more:
			t.prompt()
		default:
			fmt.Fprintln(t.out, `this was the last; "done" ends`)
		}
	default:
		t.takeText(text)
	}
}

func (t *sectionTalk) takeText(text string) {
	if _, err := strconv.ParseFloat(text, 64); err == nil {
		text += " mm"
	}
	l, err := config.ParseLength(text)
	if err != nil {
		fmt.Fprintf(t.out, "%q is no length (%v); type such as 37.95 or 5.5 in, next, u, k or done\n", text, err)
		return
	}
	t.take(section.Place{MM: l.Value, Shown: text})
}

func (t *sectionTalk) take(p section.Place) {
	q, err := t.s.Take(p)
	switch {
	case err != nil:
		fmt.Fprintln(t.out, err)
	case q != "":
		fmt.Fprintf(t.out, "%s: measure again there, or k keeps it, u takes it back\n", unitsystem.Text(t.units, q))
	default:
		list := t.s.Places(t.s.Dimension())
		fmt.Fprintf(t.out, "%s %d: %s\n", t.s.Dimension(), len(list), p.Shown)
	}
}

func tellSection(w io.Writer, units string, r *section.Result) error {
	factor, unit := unitsystem.Convert(units, "mm")
	fine := 3
	if unit == "in" {
		fine = 4
	}
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "\tplaces\tmean, %[1]s\tleast, %[1]s\tgreatest, %[1]s\tE if least everywhere\tE if greatest\tu(E) from it\t\n", unit)
	for _, d := range r.Dimensions {
		fmt.Fprintf(t, "%s\t%d\t%.*f\t%.*f\t%.*f\t%+.2f %%\t%+.2f %%\t%s\t\n", d.Name, d.N, fine, d.Mean*factor, fine, d.Least*factor, fine, d.Most*factor, 100*d.AtLeast, 100*d.AtMost, percent(d.URelative))
	}
	if err := t.Flush(); err != nil {
		return err
	}
	fourth, unit := unitsystem.Convert(units, "mm4")
	fmt.Fprintf(w, "second moment %.6g %s; the modulus carries %s of standard uncertainty from the section\n", r.SecondMoment*fourth, unit, percent(r.URelative))
	var single []string
	for _, d := range r.Dimensions {
		if d.N < 3 {
			single = append(single, d.Name)
		}
	}
	if len(single) > 0 {
		fmt.Fprintf(w, "warning: fewer than three places of %s: their spread along the specimen is hardly known\n", strings.Join(single, " and "))
	}
	return nil
}

// percent shows a relative uncertainty; one that is not known is no 0.
func percent(v float64) string {
	if v == 0 {
		return "an unknown share"
	}
	return fmt.Sprintf("%.2f %%", 100*v)
}
