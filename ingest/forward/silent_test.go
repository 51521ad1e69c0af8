package forward

import (
	"context"
	"net"
	"net/http"
	"testing"
	"time"
)

// TestNoAnswer: a server that keeps a body and never says so, one that ends the
// connection before or after it kept the body, and one that is not there are
// tried again with growing waits, and every point is there once.
func TestNoAnswer(t *testing.T) {
	const n = 300
	hang := func(s *server, w http.ResponseWriter, keep bool, body []byte) {
		if keep {
			_ = s.keep(body)
		}
		conn, _, err := w.(http.Hijacker).Hijack()
		if err != nil {
			t.Error(err)
			return
		}
		s.hung = append(s.hung, conn)
	}
	for name, c := range map[string]struct {
		cut  func(s *server, w http.ResponseWriter, body []byte)
		kept bool
	}{
		"kept, and silent":     {func(s *server, w http.ResponseWriter, body []byte) { hang(s, w, true, body) }, true},
		"not kept, and silent": {func(s *server, w http.ResponseWriter, body []byte) { hang(s, w, false, body) }, false},
		"kept, and cut off": {func(s *server, _ http.ResponseWriter, body []byte) {
			_ = s.keep(body)
			panic(http.ErrAbortHandler)
		}, true},
		"not kept, and cut off": {func(*server, http.ResponseWriter, []byte) { panic(http.ErrAbortHandler) }, false},
	} {
		t.Run(name, func(t *testing.T) {
			fsys, state := runOf(t, n)
			s := newServer(t)
			cuts := 0
			s.answer = func(w http.ResponseWriter, post int, body []byte) bool {
				if post%2 == 0 || cuts >= 6 {
					return false
				}
				cuts++
				c.cut(s, w, body)
				return true
			}
			got, err := forwardRun(t, t.Context(), fsys, state, s.URL+"/write?db=lab", "", func(o *Options) {
				o.Client = newClient()
				o.Client.Timeout = 200 * time.Millisecond
			})
			if err != nil {
				t.Fatal(err)
			}
			s.wantAll(t, n, nil)
			if got.Refused != 0 || got.Retries != int64(cuts) || cuts != 6 || len(got.waits) != cuts || (s.twice > 0) != c.kept {
				t.Errorf("%+v after %d cuts, waits %v, %d points came twice", got.Count, cuts, got.waits, s.twice)
			}
			for _, n := range got.notices {
				if n.Held {
					t.Errorf("held: %+v", n)
				}
			}
		})
	}
}

// TestNoServer: where nothing listens the waits grow to five minutes, with
// jitter, and go on for ever.
func TestNoServer(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	address := l.Addr().String()
	l.Close()
	fsys, state := runOf(t, 50)
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	var waits []time.Duration
	if _, err := forwardRun(t, ctx, fsys, state, "http://"+address+"/write?db=lab", "", func(o *Options) {
		o.Wait = func(ctx context.Context, d time.Duration) error {
			if waits = append(waits, d); len(waits) == 60 {
				stop()
			}
			return ctx.Err()
		}
	}); err == nil {
		t.Error("it ended well")
	}
	spread := map[time.Duration]bool{}
	for i, d := range waits {
		if d > 450*time.Second || i > 12 && d < 150*time.Second {
			t.Errorf("wait %d is %v", i, d)
		}
		spread[d] = true
	}
	if len(waits) != 60 || len(spread) < 50 {
		t.Errorf("%d waits, %d different: no jitter", len(waits), len(spread))
	}
}
