package terminal

import (
	"context"
	"time"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
)

// Frame is what there is to show at one moment.
type Frame struct {
	View answer.View
	// Figures are the plots; they change more seldom than the view.
	Figures []answer.Figure
	// Lost says that View is old, and why; empty while it is fresh.
	Lost string
}

// Source gives frames.
type Source interface {
	// Run gives frames as they come until the context ends. An error means
	// that none will come any more.
	Run(ctx context.Context, give func(Frame)) error
	// See notes an alarm of the view as seen by somebody.
	See(ctx context.Context, id int, by string) error
}

// Folder is the source of a run folder's desk.
type Folder struct{ Desk *desk.Desk }

// lookEvery is how often a desk is asked for its snapshot, which costs nothing.
const lookEvery = time.Second

// Run gives a frame when the desk has a new snapshot.
func (f Folder) Run(ctx context.Context, give func(Frame)) error {
	ticker := time.NewTicker(lookEvery)
	defer ticker.Stop()
	var last *desk.Snapshot
	var drawn *desk.Curves
	var figures []answer.Figure
	for {
		if s := f.Desk.Snapshot(); s != last {
			if last == nil || s.Curves != drawn || len(s.Marks) != len(last.Marks) {
				drawn, figures = s.Curves, answer.Figures(f.Desk, s)
			}
			last = s
			give(Frame{View: answer.Of(f.Desk, s), Figures: figures})
		}
		select {
		case <-ctx.Done():
			return nil
		case <-ticker.C:
		}
	}
}

// errNotHere says how alarms are marked as seen instead.
type errNotHere struct{}

func (errNotHere) Error() string {
	return "an alarm is marked as seen on the live page, or here with its address and --token FILE"
}

// See refuses: the folder belongs to its recorder.
func (Folder) See(context.Context, int, string) error { return errNotHere{} }
