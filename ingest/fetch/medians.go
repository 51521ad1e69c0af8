package fetch

import (
	"context"
	"sync"

	"golang.org/x/sync/errgroup"

	"gaugelog/ingest/segment"
)

// Ask is a run and the spans of it that medians are wanted of.
type Ask struct {
	Run   string
	Spans []segment.Interval
}

// window is a span of one run, of all runs where run is "".
type window struct {
	run  string
	span segment.Interval
}

// target is where a window's medians belong: a span of an ask.
type target struct{ ask, span int }

// A server takes long to find the readings of one run, and hardly longer for
// those of all: a span that so many runs share is asked for once.
const shared = 3

// At once go out so many requests of so many windows each.
const requests, windowsEach = 4, 50

// Medians are those of each gauge's indications in each of the spans of each
// ask, mm, worked out by the server. A gauge without a reading in a span is not
// among them.
func (s *Source) Medians(ctx context.Context, asks []Ask) ([][]map[string]float64, error) {
	out := make([][]map[string]float64, len(asks))
	for i, a := range asks {
		out[i] = make([]map[string]float64, len(a.Spans))
		for j := range out[i] {
			out[i][j] = map[string]float64{}
		}
	}
	windows, targets := windowsOf(asks)
	var group errgroup.Group
	group.SetLimit(requests)
	var mu sync.Mutex
	for from := 0; from < len(windows); from += windowsEach {
		to := min(from+windowsEach, len(windows))
		group.Go(func() error {
			return s.reader().(stander).medians(ctx, windows[from:to], func(w int, run, gauge string, mm float64) {
				mu.Lock()
				defer mu.Unlock()
				for _, t := range targets[from+w] {
					if asks[t.ask].Run == run {
						out[t.ask][t.span][gauge] = mm
					}
				}
			})
		})
	}
	return out, group.Wait()
}

// windowsOf are the windows to ask for, in the order of the asks, and where
// each one's medians belong.
func windowsOf(asks []Ask) (windows []window, targets [][]target) {
	by := map[segment.Interval][]target{}
	for i, a := range asks {
		for j, span := range a.Spans {
			by[span] = append(by[span], target{i, j})
		}
	}
	for _, a := range asks {
		for _, span := range a.Spans {
			t := by[span]
			delete(by, span)
			if len(t) >= shared {
				windows, targets = append(windows, window{span: span}), append(targets, t)
				continue
			}
			for _, one := range t {
				windows, targets = append(windows, window{asks[one.ask].Run, span}), append(targets, []target{one})
			}
		}
	}
	return windows, targets
}
