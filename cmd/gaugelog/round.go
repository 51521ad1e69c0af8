package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/ingest"
	"gaugelog/ingest/round"
	"gaugelog/ingest/segment"
)

// roundFlags are the flags of `round`.
type roundFlags struct {
	into, gauge, ports string
}

func roundCommand() *cobra.Command {
	var f roundFlags
	c := &cobra.Command{
		Use:     "round RIG...",
		GroupID: "run",
		Short:   "Takes one reading of each of many boards with one gauge carried from board to board",
		Long: `Walks through the boards in the order given and takes one reading of each: a press
of the gauge's send button or, typed, such as 12.34 or "0.486 in". The reading goes
into the run folder of that board, which analyses like any other; loads are marked
there with "gaugelog mark".

A reading that does not fit what the board showed before is questioned at once (a
misread digit, the wrong board): take it again, or "k" keeps it. "u" takes the last
reading back, "s" skips a board, "done" or the end of the input ends, and Enter behind the last board. A gauge whose
frame does not say "button: true" is read when Enter is pressed on an empty line.

A reading is on disk once the next one was taken or the walk has ended. The port
is that of the first board's gauge; without one every reading is typed.`,
		Example: "  gaugelog round boards/*.yaml --into runs/boards",
		Args:    cobra.MinimumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if f.into == "" {
				return wrongf("give --into RUNS, the folder that holds the boards' run folders", "no folder was given")
			}
			return runRound(cmd, args, f)
		},
	}
	fl := c.Flags()
	fl.StringVar(&f.into, "into", "", "folder with a run folder for each board, named as its specimen; of one board the run folder itself")
	fl.StringVar(&f.gauge, "gauge", "", "the carried gauge's name in the rig files (default: their only gauge)")
	fl.StringVar(&f.ports, "ports", "", "file of \"name path\" lines that say where the ports are, as `simulate` prints them")
	return c
}

// visited is one board of the walk with its rig and run.
type visited struct {
	rig   *config.Rig
	text  []byte
	run   string
	gauge config.Gauge
}

func runRound(cmd *cobra.Command, rigFiles []string, f roundFlags) (err error) {
	boards, list, err := boardsOf(rigFiles, f)
	if err != nil {
		return err
	}
	stored := 0
	t := &roundTalk{out: cmd.ErrOrStderr(), lines: typed(cmd.Context(), cmd.InOrStdin()), boards: boards}
	t.walk = round.New(list, func(k round.Taken) error {
		b := boards[k.Board]
		if err := b.store(k.With.(device.Reading)); err != nil {
			return err
		}
		stored++
		fmt.Fprintf(cmd.OutOrStdout(), "%s\t%s\t%s mm\n", b.rig.Specimen.Name, time.Unix(0, k.At).UTC().Format(time.RFC3339), strconv.FormatFloat(k.MM, 'f', -1, 64))
		return nil
	})
	if first := boards[0]; first.gauge.Port != "" {
		if t.live, err = carried(cmd.Context(), boards, f.ports); err != nil {
			return err
		}
		defer func() { err = errors.Join(err, t.live.close()) }()
		frame, _ := first.rig.FrameOf(first.gauge.Frame)
		t.button = frame.Button
	}
	if err := errors.Join(t.run(cmd.Context()), t.walk.Finish()); err != nil {
		return err
	}
	fmt.Fprintf(cmd.ErrOrStderr(), "%d of %d boards read\n", stored, len(boards))
	return nil
}

// boardsOf reads the rig files and what their runs hold of the gauge.
func boardsOf(rigFiles []string, f roundFlags) ([]*visited, []round.Board, error) {
	var boards []*visited
	var list []round.Board
	names := map[string]string{}
	for _, file := range rigFiles {
		v, err := visitOf(file, f, len(rigFiles) > 1)
		if err != nil {
			return nil, nil, err
		}
		name := v.rig.Specimen.Name
		if other, twice := names[name]; twice {
			return nil, nil, wrongf("give each specimen a name of its own", "%s and %s are both of specimen %q", other, file, name)
		}
		names[name] = file
		b := round.Board{Name: name, Gauge: v.gauge.Name, Resolution: v.gauge.Resolution.Value}
		if err := v.past(&b); err != nil {
			return nil, nil, fmt.Errorf("%s: %w", v.run, err)
		}
		boards, list = append(boards, v), append(list, b)
	}
	return boards, list, nil
}

func visitOf(file string, f roundFlags, several bool) (*visited, error) {
	text, err := os.ReadFile(file)
	if err != nil {
		return nil, wrong(err, "name a rig file; `gaugelog new` writes one")
	}
	rig, err := config.Parse(file, text)
	if err != nil {
		return nil, err
	}
	v := &visited{rig: rig, text: text, run: f.into}
	if several {
		v.run = filepath.Join(f.into, rig.Specimen.Name)
	}
	if f.gauge == "" && len(rig.Gauges) != 1 {
		return nil, wrongf("name the carried one with --gauge", "%s has %d gauges", file, len(rig.Gauges))
	}
	if f.gauge == "" {
		v.gauge = rig.Gauges[0]
		return v, nil
	}
	_, v.gauge, err = gaugeOf(rig, f.gauge)
	return v, err
}

// pastKept is how many earlier readings of a board are looked at.
const pastKept = 20

// past reads what the run holds of the gauge, if there is a run yet.
func (v *visited) past(b *round.Board) error {
	if _, err := os.Stat(filepath.Join(v.run, segment.RigFile)); errors.Is(err, os.ErrNotExist) {
		return nil
	}
	dir, err := ingest.OpenDir(v.run, ingest.DirOptions{})
	if err != nil {
		return err
	}
	defer dir.Close()
	folder, err := segment.OpenFolder(dir.FS())
	if err != nil {
		return err
	}
	reader := folder.Read(segment.ReadOptions{})
	defer reader.Close()
	for r, err := range reader.Records() {
		if err != nil {
			return err
		}
		if r.Kind != segment.Indication || r.Name != v.gauge.Name {
			continue
		}
		if b.Before = append(b.Before, round.Reading{At: r.Time, MM: r.MM}); len(b.Before) > 2*pastKept {
			b.Before = append(b.Before[:0], b.Before[pastKept:]...)
		}
	}
	marks, err := ingest.ListMarks(dir.FS())
	if err != nil || len(b.Before) == 0 {
		return err
	}
	gone := ingest.Withdrawn(marks)
	for _, m := range marks {
		act := m.Act != "" && m.Gauge == v.gauge.Name
		if gone[m.ID] == "" && m.Time > b.Before[len(b.Before)-1].At && (len(m.Loads) > 0 || m.Step != "" || act) {
			b.Changed = true
		}
	}
	return nil
}

// store puts one reading into the board's run folder.
func (v *visited) store(r device.Reading) error {
	amendments, err := config.LoadAmendments(filepath.Join(v.run, "amendments.yaml"))
	if err != nil {
		return err
	}
	rig, err := v.rig.Apply(amendments)
	if err != nil {
		return err
	}
	dir, err := ingest.OpenDir(v.run, ingest.DirOptions{Create: true})
	if err != nil {
		return err
	}
	defer dir.Close()
	rec, err := ingest.Open(ingest.Options{
		FS: dir.FS(), Lock: dir.Lock(fmt.Sprintf("gaugelog round, process %d", os.Getpid())),
		Rig: rig, RigBytes: v.text, Amendments: len(amendments), Program: version(),
		Clock: ingest.SystemClock{}, Start: r.At, Compress: true, Visit: true, DiskFree: dir.DiskFree,
	})
	if err != nil {
		return refused(v.run, err)
	}
	r.Rig, r.Gauge, r.Port = 0, v.gauge.Name, ""
	return errors.Join(rec.Handle(ingest.Seen(r)), rec.Close(ingest.SystemClock{}.Now()))
}

// carried opens the gauge that is carried from board to board.
func carried(ctx context.Context, boards []*visited, ports string) (*live, error) {
	first := boards[0]
	for _, b := range boards[1:] {
		if b.gauge.Port != first.gauge.Port || b.gauge.Frame != first.gauge.Frame {
			return nil, wrongf("give the carried gauge the same port and frame in every rig file", "%s and %s name different ports or frames for it", first.rig.Specimen.Name, b.rig.Specimen.Name)
		}
	}
	opener, err := openerOf(ports)
	if err != nil {
		return nil, err
	}
	alone, _, err := gaugeOf(first.rig, first.gauge.Name)
	if err != nil {
		return nil, err
	}
	return listenLive(ctx, alone, opener)
}
