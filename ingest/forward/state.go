package forward

import (
	"path"
	"strings"
	"sync"

	"gaugelog/ingest/segment"
)

// State is how far forwarding is, for those who look on.
type State struct {
	Count
	// Segments counts those of which something is still to be sent, as far as
	// is known.
	Segments int
	// Newest is the latest stamp that the server took, ns since 1970 UTC; 0 for
	// none since the start.
	Newest int64
	// Held says that a person must do something; Words what the server said
	// last, "" where it takes lines.
	Held  bool
	Words string
}

// board holds the state for other goroutines.
type board struct {
	mu sync.Mutex
	s  State
}

func (b *board) change(f func(*State)) {
	b.mu.Lock()
	defer b.mu.Unlock()
	f(&b.s)
}

// State may be called from any goroutine.
func (f *Forwarder) State() State {
	f.board.mu.Lock()
	defer f.board.mu.Unlock()
	return f.board.s
}

// behind counts the segments that are not known to be sent to their end.
func (f *Forwarder) behind() {
	entries, err := f.o.FS.ReadDir(segment.ReadingsDir)
	if err != nil {
		return // the pass says so
	}
	left := map[string]bool{}
	for _, e := range entries {
		name := path.Join(segment.ReadingsDir, strings.TrimSuffix(e.Name(), ".zst"))
		if strings.HasSuffix(name, ".lp") && !f.whole[name] {
			left[name] = true
		}
	}
	f.board.change(func(s *State) { s.Segments = len(left) })
}

// noted keeps what a notice says.
func (f *Forwarder) noted(n Notice) {
	f.board.change(func(s *State) {
		s.Count = f.count
		if n.Refused == "" && n.Again == "" {
			s.Held, s.Words = n.Held, n.Words
		}
	})
}
