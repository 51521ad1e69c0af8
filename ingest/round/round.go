// Package round is the walk of a hand-carried gauge past many boards: one
// reading each, in order, questioned at once where it does not fit what that
// board showed before.
//
// A Walk knows the boards and what they showed; it reads no clock, no port and
// no file. It promises that a reading is settled, to be stored, only once the
// next board's was taken or the walk ended, so that the last one can be taken
// back, and that a questioned reading is kept only when it came twice or the
// person insists.
package round

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"time"
)

// Board is one specimen of a walk.
type Board struct {
	// Name is the specimen's; Gauge that of the gauge in its rig file.
	Name, Gauge string
	// Resolution is the gauge's, mm.
	Resolution float64
	// Before are its earlier readings, oldest first; the last few are enough.
	Before []Reading
	// Changed says that a load was changed since the last of them.
	Changed bool
}

// Reading is one reading of a board.
type Reading struct {
	At int64   // ns since 1970 UTC
	MM float64 // mm
}

// How far a reading may lie from the board's last one before it is questioned,
// in resolutions and in times of the greatest of the last changes. The figures
// are our own: wide enough for ordinary creep, narrow enough for a misread
// digit or the wrong board.
const (
	fewCounts     = 10  // always allowed
	unknownCounts = 100 // where too little is known of the board's changes
	timesGreatest = 3
	lastChanges   = 10
	sameCounts    = 3 // two presses of one display
)

// Taken is a reading of the walk, with what the caller keeps beside it.
type Taken struct {
	Board int
	Reading
	// With is the caller's own.
	With any
}

// Walk goes past the boards in order. Not safe for use by several goroutines.
type Walk struct {
	boards  []Board
	at      int
	pending *Taken // accepted, not yet settled
	asked   *Taken // questioned
	settle  func(Taken) error
}

// New begins a walk; settle is called for each reading once it counts. It
// panics without boards.
func New(boards []Board, settle func(Taken) error) *Walk {
	if len(boards) == 0 || settle == nil {
		panic("round: a walk needs boards and where to put readings")
	}
	return &Walk{boards: boards, settle: settle}
}

// Board is the one whose turn it is, and its number from 1; nil when all are done.
func (w *Walk) Board() (*Board, int) {
	if w.at >= len(w.boards) {
		return nil, 0
	}
	return &w.boards[w.at], w.at + 1
}

// Take takes a reading for the board whose turn it is. A question comes back
// where it does not fit; then the same reading again, or Keep, accepts it.
// Errors are of settling the reading before.
func (w *Walk) Take(r Reading, with any) (question string, err error) {
	b, _ := w.Board()
	if b == nil {
		return "", errors.New("every board has its reading; take the last one back first")
	}
	t := &Taken{Board: w.at, Reading: r, With: with}
	again := w.asked != nil && math.Abs(w.asked.MM-r.MM) <= sameCounts*b.Resolution+1e-9
	if q := w.question(b, r); q != "" && !again {
		w.asked = t
		return q, nil
	}
	return "", w.accept(t)
}

// Keep accepts the reading that was questioned.
func (w *Walk) Keep() error {
	if w.asked == nil {
		return errors.New("no reading is in question")
	}
	return w.accept(w.asked)
}

// Skip goes on to the next board without a reading.
func (w *Walk) Skip() error {
	if w.at >= len(w.boards) {
		return errors.New("there is no board left to skip")
	}
	if err := w.flush(); err != nil {
		return err
	}
	w.asked = nil
	w.at++
	return nil
}

// Back takes back what was questioned or, where nothing is, the last reading,
// which is then asked for again.
func (w *Walk) Back() (what string, ok bool) {
	if w.asked != nil {
		mm := w.asked.MM
		w.asked = nil
		return fmt.Sprintf("%s of %s", w.boards[w.at].words(mm), w.boards[w.at].Name), true
	}
	if w.pending == nil {
		return "", false
	}
	t := w.pending
	w.pending, w.at = nil, t.Board
	return fmt.Sprintf("%s of %s", w.boards[t.Board].words(t.MM), w.boards[t.Board].Name), true
}

// Finish settles the last reading. A questioned one does not count.
func (w *Walk) Finish() error {
	w.asked = nil
	return w.flush()
}

func (w *Walk) accept(t *Taken) error {
	if err := w.flush(); err != nil {
		return err
	}
	w.asked, w.pending = nil, t
	w.at++
	return nil
}

// flush settles what was accepted; after an error it is still there.
func (w *Walk) flush() error {
	if w.pending == nil {
		return nil
	}
	if err := w.settle(*w.pending); err != nil {
		return err
	}
	w.pending = nil
	return nil
}

// question says in words why a reading does not fit; "" where it does.
func (w *Walk) question(b *Board, r Reading) string {
	if len(b.Before) == 0 || b.Changed {
		return ""
	}
	last := b.Before[len(b.Before)-1]
	d := r.MM - last.MM
	if math.Abs(d) <= b.allowed()+1e-9 {
		return ""
	}
	q := fmt.Sprintf("%s of %s is %s from its last, %s %s ago", b.words(r.MM), b.Name, signed(b.words(d)), b.words(last.MM), ago(r.At-last.At))
	if other := w.looksLike(b, r.MM); other != "" {
		q += "; it is what " + other + " showed"
	}
	return q
}

// allowed is how far the next reading may lie from the last, mm.
func (b *Board) allowed() float64 {
	n := len(b.Before)
	if n < 3 {
		return unknownCounts * b.Resolution
	}
	greatest := 0.0
	for i := max(1, n-lastChanges); i < n; i++ {
		greatest = math.Max(greatest, math.Abs(b.Before[i].MM-b.Before[i-1].MM))
	}
	return math.Max(fewCounts*b.Resolution, timesGreatest*greatest)
}

// looksLike names another board that showed about the same last.
func (w *Walk) looksLike(b *Board, mm float64) string {
	for i := range w.boards {
		o := &w.boards[i]
		if o != b && len(o.Before) > 0 && math.Abs(o.Before[len(o.Before)-1].MM-mm) <= fewCounts*o.Resolution {
			return o.Name
		}
	}
	return ""
}

// words shows a value to the gauge's resolution.
func (b *Board) words(mm float64) string {
	digits := 3
	if b.Resolution > 0 {
		digits = max(0, int(math.Ceil(-math.Log10(b.Resolution)-1e-9)))
	}
	return strconv.FormatFloat(mm, 'f', digits, 64) + " mm"
}

func signed(words string) string {
	if words[0] == '-' {
		return words
	}
	return "+" + words
}

// ago shows a span of time by its two greatest parts.
func ago(ns int64) string {
	d := time.Duration(ns)
	switch {
	case d >= 48*time.Hour:
		return fmt.Sprintf("%d d", int(d.Hours()/24))
	case d >= time.Hour:
		return fmt.Sprintf("%d h %d min", int(d.Hours()), int(d.Minutes())%60)
	case d >= time.Minute:
		return fmt.Sprintf("%d min", int(d.Minutes()))
	}
	return fmt.Sprintf("%d s", int(d.Seconds()))
}
