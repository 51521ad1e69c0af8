package forward

import (
	"context"
	"net/http"
	"testing"
	"time"

	"gaugelog/ingest/segment"
)

// TestRenewedToken: a token that was put right while access is refused is taken
// up without a new start.
func TestRenewedToken(t *testing.T) {
	fsys, state := runOf(t, 50)
	s := newServer(t)
	s.script = func(_ int, r *http.Request, _ []byte) (int, map[string]string, string) {
		if r.Header.Get("Authorization") != "Bearer right" {
			return 401, nil, "not you"
		}
		return 0, nil, ""
	}
	read := 0
	var held State
	got, err := forwardRun(t, t.Context(), fsys, state, s.URL+"/write?db=lab", "wrong", func(o *Options) {
		var f *Forwarder
		o.opened = func(x *Forwarder) { f = x }
		o.Token = func() (string, error) {
			if read++; read < 3 {
				return "wrong", nil
			}
			return "right\n", nil
		}
		wait := o.Wait
		o.Wait = func(ctx context.Context, d time.Duration) error { held = f.State(); return wait(ctx, d) }
	})
	if err != nil {
		t.Fatal(err)
	}
	s.wantAll(t, 50, nil)
	if read != 3 || len(got.waits) != 3 || !held.Held || held.Segments != 1 {
		t.Errorf("read the token %d times, waited %v, while held %+v", read, got.waits, held)
	}
}

// TestCompressedMeanwhile: segments that are compressed while older ones are
// sent are sent all the same, each line once.
func TestCompressedMeanwhile(t *testing.T) {
	fsys, state := runOf(t, 100)
	h := segment.Header{Run: "run-1", Boot: "b", Rig: "00", Clock: segment.ClockState{Wall: start, Synced: true}}
	for k := 1; k < 5; k++ {
		write(t, fsys, k+1, h, k*100, (k+1)*100, true)
	}
	s := newServer(t)
	s.script = func(post int, _ *http.Request, _ []byte) (int, map[string]string, string) {
		if post == 2 {
			for k := range 5 {
				if _, err := segment.Compress(fsys, k+1); err != nil {
					t.Error(err)
				}
			}
		}
		return 0, nil, ""
	}
	got, err := forwardRun(t, t.Context(), fsys, state, s.URL+"/write?db=lab", "", nil)
	if err != nil {
		t.Fatal(err)
	}
	s.wantAll(t, 500, nil)
	if s.twice > 0 || got.Sent != 501 {
		t.Errorf("%d points twice, %+v", s.twice, got.Count)
	}
}
