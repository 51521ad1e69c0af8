// Package nudge tells which gauge was just touched, from the indications of
// all: by how much it moved, which way, and when it had come to rest.
//
// It is pure: indications with their times go in, touches come out. It
// promises that noise is no touch (a movement must exceed both a stated size
// and six times the source's own scatter at rest), that two sources moving at
// once are told as such instead of choosing one, and that memory is bounded
// whatever comes.
package nudge

import (
	"math"
	"slices"
	"time"
)

// Touch is one movement of one source, over and done.
type Touch struct {
	Source string
	// From is the rest before, Peak the farthest indication, To the rest
	// after, mm.
	From, Peak, To float64
	// Beside names other sources that moved meanwhile by at least a fifth of
	// it: the touch may have been theirs.
	Beside []string
}

// Moved is the farthest excursion with its sign, mm: more than 0 where the
// indication grew.
func (t Touch) Moved() float64 { return t.Peak - t.From }

// Options sets what a touch is; zero values mean the defaults.
type Options struct {
	Least time.Duration // a source is at rest after this long without movement; default 1 s
	Size  float64       // the smallest movement that counts, mm; default 0.05 mm
}

// Watcher follows all sources. It is not safe for concurrent use.
type Watcher struct {
	o       Options
	sources map[string]*source
}

// kept is the number of indications a source's rest is judged by.
const kept = 16

type source struct {
	name   string
	rest   []float64 // the last indications at rest, the newest last
	moving bool
	from   float64
	peak   float64
	last   float64
	still  time.Duration // since when it stays within the size of last
	began  time.Duration
	ended  time.Duration
}

// New returns a watcher that knows no source yet.
func New(o Options) *Watcher {
	if o.Least <= 0 {
		o.Least = time.Second
	}
	if !(o.Size > 0) {
		o.Size = 0.05
	}
	return &Watcher{o: o, sources: map[string]*source{}}
}

// Add takes one indication (mm) at a time and returns the touch that ended
// with it, if one did. The first indications of a source (a second's worth, at
// least three) only show where it rests. Times must not go back.
func (w *Watcher) Add(name string, at time.Duration, mm float64) (Touch, bool) {
	if math.IsNaN(mm) || math.IsInf(mm, 0) {
		return Touch{}, false
	}
	s := w.sources[name]
	if s == nil {
		s = &source{name: name, began: at}
		w.sources[name] = s
	}
	if !s.moving {
		w.resting(s, at, mm)
		return Touch{}, false
	}
	if math.Abs(mm-s.from) > math.Abs(s.peak-s.from) {
		s.peak = mm
	}
	if math.Abs(mm-s.last) > w.limit(s)/2 {
		s.last, s.still = mm, at
		return Touch{}, false
	}
	if at-s.still < w.o.Least {
		return Touch{}, false
	}
	return w.end(s, at, mm), true
}

// resting takes an indication of a source that has not been moving.
func (w *Watcher) resting(s *source, at time.Duration, mm float64) {
	known := len(s.rest) >= 3 && at-s.began >= w.o.Least
	if rest := median(s.rest); known && math.Abs(mm-rest) > w.limit(s) {
		s.moving, s.from, s.peak, s.last, s.still = true, rest, mm, mm, at
		s.began = at
		return
	}
	if len(s.rest) == kept {
		s.rest = append(s.rest[:0], s.rest[1:]...)
	}
	s.rest = append(s.rest, mm)
}

// end closes a movement and looks who else moved during it.
func (w *Watcher) end(s *source, at time.Duration, mm float64) Touch {
	t := Touch{Source: s.name, From: s.from, Peak: s.peak, To: mm}
	size := math.Abs(t.Moved())
	for _, o := range w.sources {
		if o == s {
			continue
		}
		overlaps := o.moving || o.ended > s.began
		if moved := math.Abs(o.peak - o.from); overlaps && moved >= size/5 {
			t.Beside = append(t.Beside, o.name)
		}
	}
	slices.Sort(t.Beside)
	s.moving, s.ended = false, at
	s.rest = append(s.rest[:0], mm, mm, mm) // it rests here now
	return t
}

// limit is what counts as movement of a source: the stated size, or six times
// its scatter.
func (w *Watcher) limit(s *source) float64 {
	m := median(s.rest)
	dev := make([]float64, len(s.rest))
	for i, v := range s.rest {
		dev[i] = math.Abs(v - m)
	}
	return math.Max(w.o.Size, 6*1.4826*median(dev))
}

func median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	sorted := slices.Sorted(slices.Values(v))
	n := len(sorted)
	return (sorted[(n-1)/2] + sorted[n/2]) / 2
}
