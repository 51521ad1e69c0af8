package main

import (
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gaugelog/analysis/stiffness"
	"gaugelog/config"
	livepage "gaugelog/ingest/live"
	"gaugelog/ingest/onlook"
	"gaugelog/ingest/segment"
	"gaugelog/ingest/terminal"
)

// watchFlags are the flags of `watch`.
type watchFlags struct {
	token, by          string
	once, asJSON, calm bool
}

func watchCommand() *cobra.Command {
	var f watchFlags
	c := &cobra.Command{
		Use:     "watch RUN|URL",
		GroupID: "run",
		Short:   "Shows a test in the terminal while it runs",
		Long: `Shows what the live page shows, in a terminal: is it alive, was it knocked
overnight, how much travel is left, what changed since yesterday, is it speeding
up, then the plot, the gauges, the forecast, the alarms and the recording. It
looks at a run folder, beside the recorder and without touching it, or at the
address of a live page.

A run folder tells what is on disk, which is some seconds old. The keys stand at
the bottom of the screen. Where the output is no terminal, a line is printed when
an answer changes: at once for an alarm, once a minute at most for figures.
NO_COLOR=1 leaves the colours out.

Suspended loads hurt people: looking here is safe, going near to check is not.`,
		Example: "  gaugelog watch runs/first\n  gaugelog watch http://127.0.0.1:8700/ --token token.txt --by mo\n  gaugelog watch runs/first --once",
		Args:    cobra.ExactArgs(1),
		ValidArgsFunction: func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
			return nil, cobra.ShellCompDirectiveFilterDirs
		},
		RunE: func(cmd *cobra.Command, args []string) error { return runWatch(cmd, args[0], f) },
	}
	c.Flags().BoolVar(&f.once, "once", false, "print the answers once, as text, and end")
	c.Flags().BoolVar(&f.asJSON, "json", false, "print as JSON: a line when an answer changes, or one with --once")
	c.Flags().StringVar(&f.token, "token", "", "file whose first line is the page's token")
	c.Flags().StringVar(&f.by, "by", "", "who marks alarms as seen")
	c.Flags().BoolVar(&f.calm, "no-analysis", false, "leave out what the analysis would say of a run folder")
	return c
}

// runWatch shows a source until a person, a signal or its end stops it.
func runWatch(cmd *cobra.Command, what string, f watchFlags) (err error) {
	ctx := cmd.Context()
	var source terminal.Source
	if strings.Contains(what, "://") {
		if source, err = pageSource(ctx, what, f.token); err != nil {
			return err
		}
	} else {
		if f.token != "" {
			return wrongf("give the page's address, or leave --token out", "--token belongs to a page's address, %s is a folder", what)
		}
		w, err := openOnlooker(what, f.calm)
		if err != nil {
			return err
		}
		var running sync.WaitGroup
		looking, end := context.WithCancel(ctx)
		running.Go(func() { w.Run(looking) })
		defer func() {
			end()
			running.Wait()
			err = errors.Join(err, w.Close())
		}()
		source = terminal.Folder{Desk: w.Desk()}
	}
	return showSource(ctx, cmd, source, f)
}

// showSource chooses the form for where the output goes.
func showSource(ctx context.Context, cmd *cobra.Command, source terminal.Source, f watchFlags) error {
	out := cmd.OutOrStdout()
	switch {
	case f.asJSON && f.once:
		return terminal.JSONOnce(ctx, source, out)
	case f.asJSON:
		return terminal.JSON(ctx, source, out)
	case f.once:
		return terminal.Once(ctx, source, out)
	case !toTerminal(out) || !isTerminal(cmd.InOrStdin()) || os.Getenv("TERM") == "dumb":
		return terminal.Lines(ctx, source, out)
	}
	return terminal.Show(ctx, source, terminal.Options{
		In: cmd.InOrStdin(), Out: out, Environ: os.Environ(), By: f.by, ASCII: !terminal.UTF8(os.Environ()),
	})
}

// toTerminal reports whether what is written goes to a terminal.
func toTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

// pageSource opens a live page.
func pageSource(ctx context.Context, address, tokenFile string) (terminal.Source, error) {
	token := ""
	if tokenFile != "" {
		var err error
		if token, err = livepage.ReadToken(tokenFile); err != nil {
			return nil, wrong(err, "give the file that record --page-token was given")
		}
	}
	p, err := terminal.OpenPage(ctx, address, token)
	if err != nil {
		return nil, wrong(err, "give the address that record --page printed, or a run folder")
	}
	return p, nil
}

// openOnlooker looks at a run folder.
func openOnlooker(run string, calm bool) (*onlook.Onlooker, error) {
	file := filepath.Join(run, segment.RigFile)
	text, err := os.ReadFile(file)
	if err != nil {
		return nil, wrong(err, "name a run folder, or the address of a live page")
	}
	rig, err := config.Parse(file, text)
	if err != nil {
		return nil, err
	}
	amendments, err := config.LoadAmendments(filepath.Join(run, "amendments.yaml"))
	if err != nil {
		return nil, err
	}
	if rig, err = rig.Apply(amendments); err != nil {
		return nil, err
	}
	g, _, err := stiffness.GravityOf(rig.Gravity)
	if err != nil {
		return nil, err
	}
	o := onlook.Options{Rig: rig, Gravity: g.Value}
	if !calm {
		o.Analyse = outlookOf(run)
	}
	return onlook.Open(run, o)
}
