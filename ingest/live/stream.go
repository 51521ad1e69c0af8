package live

import (
	"net/http"
	"time"
)

// streamEvery is how often a stream looks for something new; streamBeat how
// often it says that it is alive although nothing is.
const (
	streamEvery = time.Second
	streamBeat  = 15 * time.Second
	streamWrite = 5 * time.Second
)

// change is one section's new contents.
type change struct {
	ID   string `json:"id"`
	HTML string `json:"html"`
}

// stream sends the sections that change, until the client or the server goes.
func (s *Server) stream(w http.ResponseWriter, r *http.Request, p *page) {
	known := s.guard.known(r)
	last := map[string]string{}
	spoke := time.Now()
	s.events(w, r, func() []event {
		out := p.changes(last, known)
		// The page's script counts from the last event it was given: an empty
		// one is its sign of life.
		if len(out) == 0 && time.Since(spoke) < streamBeat {
			return nil
		}
		spoke = time.Now()
		return []event{{"sections", out}}
	})
}
