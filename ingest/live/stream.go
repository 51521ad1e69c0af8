package live

import (
	"encoding/json"
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
	select {
	case s.streams <- struct{}{}:
		defer func() { <-s.streams }()
	default:
		w.Header().Set("Retry-After", "30")
		http.Error(w, "too many people are looking at once", http.StatusServiceUnavailable)
		return
	}
	control := http.NewResponseController(w)
	_ = control.SetReadDeadline(time.Time{}) // the request is read; only writes are watched
	h := w.Header()
	h.Set("Content-Type", "text/event-stream")
	h.Set("X-Accel-Buffering", "no")
	known := s.guard.known(r)
	last := map[string]string{}
	spoke := time.Time{}
	ticker := time.NewTicker(streamEvery)
	defer ticker.Stop()
	for first := true; ; first = false {
		if !first {
			select {
			case <-ticker.C:
			case <-r.Context().Done():
				return
			}
		}
		out := p.changes(last, known)
		if len(out) == 0 && time.Since(spoke) < streamBeat {
			continue
		}
		spoke = time.Now()
		// A client that takes nothing for this long is cut off.
		if control.SetWriteDeadline(time.Now().Add(streamWrite)) != nil {
			return
		}
		b, err := json.Marshal(out)
		if err != nil {
			return
		}
		if _, err := w.Write([]byte("event: sections\ndata: " + string(b) + "\n\n")); err != nil {
			return
		}
		if control.Flush() != nil {
			return
		}
	}
}
