package terminal_test

import (
	"context"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"
	"time"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/live"
	"gaugelog/ingest/terminal"
)

const testToken = "a-token-for-tests-only"

// serve puts a live page before a world until stop is called.
func serve(t *testing.T, w *desktest.World, address string, open bool) (s *live.Server, stop func()) {
	t.Helper()
	var err error
	for range 50 { // the port may still be held by the one before
		s, err = live.Listen(live.Options{Desks: []*desk.Desk{w.Desk}, Address: address, Token: testToken, Open: open})
		if err == nil {
			break
		}
		time.Sleep(20 * time.Millisecond)
	}
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()
	stop = sync.OnceFunc(func() {
		cancel()
		if err := <-ended; err != nil {
			t.Error(err)
		}
	})
	t.Cleanup(stop)
	return s, stop
}

// latest keeps the frame that came last.
type latest struct {
	mu    sync.Mutex
	frame terminal.Frame
}

func (l *latest) until(t *testing.T, what string, fits func(terminal.Frame) bool) terminal.Frame {
	t.Helper()
	for deadline := time.Now().Add(30 * time.Second); ; time.Sleep(20 * time.Millisecond) {
		l.mu.Lock()
		f := l.frame
		l.mu.Unlock()
		if fits(f) {
			return f
		}
		if time.Now().After(deadline) {
			t.Fatalf("never: %s; the last frame is %+v", what, f)
		}
	}
}

// A terminal elsewhere sees the page's answers, marks an alarm as seen with the
// token, says so when the recorder is lost, and finds it again.
func TestFollowingAPage(t *testing.T) {
	w := desktest.New(t, desktest.Options{Past: 2 * time.Hour})
	s, stop := serve(t, w, "127.0.0.1:0", false)
	p, err := terminal.OpenPage(t.Context(), s.URL(), testToken)
	if err != nil {
		t.Fatal(err)
	}
	var last latest
	ctx, end := context.WithCancel(context.Background())
	defer end()
	ran := make(chan error, 1)
	go func() {
		ran <- p.Run(ctx, func(f terminal.Frame) { last.mu.Lock(); last.frame = f; last.mu.Unlock() })
	}()
	f := last.until(t, "the first view", func(f terminal.Frame) bool {
		return strings.HasPrefix(f.View.Alive.Short, "Yes: 4 of 4") && f.View.Whole && len(f.Figures) == 3
	})
	if len(f.Figures[1].Lines) != 2 || len(f.Figures[1].Lines[0].Points) < 50 {
		t.Errorf("the plots hold %+v", f.Figures[1])
	}
	w.Move("mid", 6)
	f = last.until(t, "the limit is passed", func(f terminal.Frame) bool { return f.View.Banner.Tone.Class == "danger" })
	stranger, err := terminal.OpenPage(t.Context(), s.URL(), "")
	if err != nil {
		t.Fatal(err)
	}
	if err := stranger.See(t.Context(), f.View.Alarms[0].ID, "mo"); err == nil || !strings.Contains(err.Error(), "--token") {
		t.Errorf("without the token an alarm is marked as seen: %v", err)
	}
	if err := p.See(t.Context(), 98765, "mo"); err == nil || !strings.Contains(err.Error(), "not raised") {
		t.Errorf("an alarm that is not there is marked as seen: %v", err)
	}
	if err := p.See(t.Context(), f.View.Alarms[0].ID, "mo"); err != nil {
		t.Fatal(err)
	}
	last.until(t, "it was seen", func(f terminal.Frame) bool { return strings.HasSuffix(f.View.Alarms[0].Seen, "by mo") })

	address := strings.TrimSuffix(strings.TrimPrefix(s.URL(), "http://"), "/")
	stop()
	lost := last.until(t, "the recorder is lost", func(f terminal.Frame) bool { return f.Lost != "" })
	if lost.View.Title == "" {
		t.Error("what was known is forgotten with the connection")
	}
	serve(t, w, address, false)
	last.until(t, "the recorder is back", func(f terminal.Frame) bool { return f.Lost == "" })
	end()
	if err := <-ran; err != nil {
		t.Error(err)
	}
}

// A page that other machines reach wants its token for looking too.
func TestAPageThatWantsItsToken(t *testing.T) {
	w := desktest.New(t, desktest.Options{})
	s, _ := serve(t, w, "127.0.0.1:0", true)
	if _, err := terminal.OpenPage(t.Context(), s.URL(), ""); err == nil || !strings.Contains(err.Error(), "--token") {
		t.Errorf("opened without the token: %v", err)
	}
	p, err := terminal.OpenPage(t.Context(), s.URL()+"r/"+w.Desk.Name(), "a-wrong-token-of-some-length")
	if err != nil {
		t.Fatal(err)
	}
	if err := p.Run(t.Context(), func(terminal.Frame) { t.Error("a frame came with a wrong token") }); err == nil || !strings.Contains(err.Error(), "--token") {
		t.Errorf("a wrong token: %v", err)
	}
}

// What is no live page is refused in words, and never followed elsewhere.
func TestNoPage(t *testing.T) {
	for _, address := range []string{"", "runs/first", "ftp://127.0.0.1/", "http://", "http://%zz/"} {
		if _, err := terminal.OpenPage(t.Context(), address, ""); err == nil {
			t.Errorf("%q was opened", address)
		}
	}
	answers := map[string]http.HandlerFunc{
		"it leads elsewhere": func(w http.ResponseWriter, r *http.Request) {
			http.Redirect(w, r, "http://192.0.2.1/", http.StatusFound)
		},
		"several rigs": func(w http.ResponseWriter, _ *http.Request) { _, _ = w.Write([]byte("<p>rigs")) },
		"answered 500": func(w http.ResponseWriter, _ *http.Request) { http.Error(w, "no", 500) },
	}
	for want, answer := range answers {
		s := httptest.NewServer(answer)
		if _, err := terminal.OpenPage(t.Context(), s.URL, ""); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v", want, err)
		}
		s.Close()
	}
}

// A server that sends rubbish, or without end, is let go and tried again.
func TestRubbishFromAPage(t *testing.T) {
	for name, body := range map[string]string{
		"no JSON":      "event: view\ndata: {\n\n",
		"no end":       "data: " + strings.Repeat("x", 5<<20),
		"other events": "event: other\ndata: {}\n\nretry: 1\n",
	} {
		t.Run(name, func(t *testing.T) {
			s := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) { _, _ = w.Write([]byte(body)) }))
			defer s.Close()
			p, err := terminal.OpenPage(t.Context(), s.URL+"/r/x/", "")
			if err != nil {
				t.Fatal(err)
			}
			ctx, stop := context.WithCancel(t.Context())
			defer stop()
			lost := 0
			if err := p.Run(ctx, func(f terminal.Frame) {
				if lost++; f.Lost == "" {
					t.Errorf("a view came of it: %+v", f)
				}
				stop()
			}); err != nil {
				t.Error(err)
			}
			if lost != 1 {
				t.Errorf("it was called lost %d times", lost)
			}
		})
	}
}
