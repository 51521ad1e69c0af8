package main

import (
	"io"
	"os"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// progress is a bar on a terminal, and nothing anywhere else.
type progress struct{ bar *progressbar.ProgressBar }

// newProgress makes a bar of the given length where w is a terminal.
func newProgress(w io.Writer, what string, length int64) *progress {
	f, ok := w.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return &progress{}
	}
	return &progress{progressbar.NewOptions64(length,
		progressbar.OptionSetWriter(w), progressbar.OptionSetDescription(what),
		progressbar.OptionSetWidth(30), progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionSetPredictTime(true), progressbar.OptionClearOnFinish())}
}

// at moves the bar; a bar that cannot be drawn is left alone.
func (p *progress) at(done int64) {
	if p.bar != nil {
		_ = p.bar.Set64(done)
	}
}

func (p *progress) done() {
	if p.bar != nil {
		_ = p.bar.Finish()
	}
}
