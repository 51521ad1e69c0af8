package main

import (
	"io"
	"os"
	"sync"
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

// barAfter is how long work may take before a bar tells of it.
var barAfter = time.Second

// working tells on a terminal that work goes on, once it has taken a second: how
// much of a known length is done, or, with length -1 and nil for done, for how
// long. The function it returns ends that, and may be called twice.
func working(w io.Writer, what string, length int64, done func() int64) (stop func()) {
	if w == nil || !toTerminal(w) {
		return func() {}
	}
	quit := make(chan struct{})
	var drawing sync.WaitGroup
	drawing.Go(func() {
		wait := time.NewTimer(barAfter)
		defer wait.Stop()
		select {
		case <-quit:
			return
		case <-wait.C:
		}
		bar := newProgress(w, what, length)
		defer bar.done()
		ticker := time.NewTicker(200 * time.Millisecond)
		defer ticker.Stop()
		for n := int64(1); ; n++ {
			if done != nil {
				n = min(done(), length-1) // whoever stops it knows that all is done
			}
			bar.at(n)
			select {
			case <-quit:
				return
			case <-ticker.C:
			}
		}
	})
	return sync.OnceFunc(func() {
		close(quit)
		drawing.Wait()
	})
}
