package live

import (
	"encoding/json"
	"net/http"
	"time"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
)

// follow streams what the page says as JSON, for a terminal elsewhere: events
// "view" with an answer.View, and "figures" with the plots when they change.
func (s *Server) follow(w http.ResponseWriter, r *http.Request, p *page) {
	var last *desk.Snapshot
	s.events(w, r, func() []event {
		now := p.desk.Snapshot()
		if now == last {
			return nil
		}
		var out []event
		if last == nil || now.Curves != last.Curves || len(now.Marks) != len(last.Marks) {
			out = append(out, event{"figures", answer.Figures(p.desk, now)})
		}
		last = now
		return append(out, event{"view", answer.Of(p.desk, now)})
	})
}

// event is one thing sent on a stream.
type event struct {
	name string
	data any
}

// events sends what next gives, about once a second, until the client or the
// server goes; a beat without news says that it is alive.
func (s *Server) events(w http.ResponseWriter, r *http.Request, next func() []event) {
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
		out := next()
		if len(out) == 0 && time.Since(spoke) < streamBeat {
			continue
		}
		spoke = time.Now()
		// A client that takes nothing for this long is cut off.
		if control.SetWriteDeadline(time.Now().Add(streamWrite)) != nil {
			return
		}
		text := []byte(": alive\n\n")
		for i, e := range out {
			b, err := json.Marshal(e.data)
			if err != nil {
				s.o.Log.Error("what the page says cannot be sent", "event", e.name, "error", err)
				return
			}
			if i == 0 {
				text = text[:0]
			}
			text = append(text, "event: "+e.name+"\ndata: "...)
			text = append(append(text, b...), "\n\n"...)
		}
		if _, err := w.Write(text); err != nil {
			return
		}
		if control.Flush() != nil {
			return
		}
	}
}
