package alarm

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"io"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

func message() Message {
	return NewMessage("r1", "Slat 3", "slat-3", noon, []Alarm{
		{ID: 2, Cause: "sag", Level: Danger, Text: "the sag at mid is 9.1 mm (uncorrected), the limit 9 mm", Advice: Advice("sag"), Raised: noon},
		{ID: 1, Cause: "silent", Subject: "left", Level: Abnormal, Text: "nothing has come", Advice: Advice("silent"), Raised: noon},
	})
}

func TestMessagesSayWhatMatters(t *testing.T) {
	m := message()
	for _, want := range []string{"DANGER Slat 3: the sag at mid is 9.1 mm", "do not go near to check", "left: nothing has come", Safety} {
		if !strings.Contains(m.Text, want) {
			t.Errorf("the text lacks %q:\n%s", want, m.Text)
		}
	}
	if m.Level != Danger {
		t.Errorf("the level is %s", m.Level)
	}
	b, err := json.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{`"schema":"gaugelog.alarm/1"`, `"level":"danger"`, `"gauge":"left"`, `"raised":"2026-03-02T12:00:00Z"`} {
		if !bytes.Contains(b, []byte(want)) {
			t.Errorf("the JSON lacks %s: %s", want, b)
		}
	}
	if bytes.Contains(b, []byte(`"over"`)) || bytes.Contains(b, []byte(`"seen"`)) {
		t.Errorf("the JSON holds instants that are not there: %s", b)
	}
}

func TestCommandGetsJSON(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("the test's program is a shell script")
	}
	into := filepath.Join(t.TempDir(), "out; rm -rf x") // no shell must ever see it
	c := &Command{Program: "/bin/sh", Args: []string{"-c", `cat > "$0"`, into}}
	if err := c.Tell(t.Context(), message()); err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(into)
	if err != nil {
		t.Fatal(err)
	}
	var m struct{ Run, Text string }
	if err := json.Unmarshal(b, &m); err != nil || m.Run != "r1" || !strings.Contains(m.Text, Safety) {
		t.Errorf("the program got %s (%v)", b, err)
	}
}

func TestCommandsThatFail(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("the test's program is a shell script")
	}
	c := &Command{Program: "/bin/sh", Args: []string{"-c", "echo no modem >&2; exit 4"}}
	if err := c.Tell(t.Context(), message()); err == nil || !strings.Contains(err.Error(), "no modem") || !strings.Contains(err.Error(), "4") {
		t.Errorf("a failing program: %v", err)
	}
	c = &Command{Program: "/bin/sh", Args: []string{"-c", "exec sleep 60"}, Within: 100 * time.Millisecond}
	began := time.Now()
	if err := c.Tell(t.Context(), message()); err == nil || time.Since(began) > 20*time.Second {
		t.Errorf("a hanging program: %v after %s", err, time.Since(began))
	}
	if err := (&Command{Program: "/no/such/program"}).Tell(t.Context(), message()); err == nil {
		t.Error("a missing program was run")
	}
}

// hook is a server that answers by a script, the last answer for ever.
func hook(t *testing.T, answers ...func(http.ResponseWriter, *http.Request)) (*httptest.Server, *atomic.Int64) {
	t.Helper()
	var calls atomic.Int64
	s := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		n := int(calls.Add(1)) - 1
		answers[min(n, len(answers)-1)](w, r)
	}))
	t.Cleanup(s.Close)
	return s, &calls
}

func code(n int) func(http.ResponseWriter, *http.Request) {
	return func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(n) }
}

func webhook(t *testing.T, url string) *Webhook {
	t.Helper()
	client := &http.Client{Timeout: 5 * time.Second, Transport: &http.Transport{DisableKeepAlives: true}}
	return &Webhook{URL: url, First: time.Millisecond, For: 20 * time.Second, Client: client}
}

func TestWebhookTriesAgain(t *testing.T) {
	s, calls := hook(t, code(500), code(502), code(408), func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Retry-After", "1")
		w.WriteHeader(503)
	}, code(204))
	began := time.Now()
	if err := webhook(t, s.URL).Tell(t.Context(), message()); err != nil {
		t.Fatal(err)
	}
	if calls.Load() != 5 {
		t.Errorf("%d tries, want 5", calls.Load())
	}
	if time.Since(began) < time.Second {
		t.Error("Retry-After was not obeyed")
	}
}

func TestWebhookGivesUp(t *testing.T) {
	other, reached := hook(t, code(204))
	for name, answer := range map[string]func(http.ResponseWriter, *http.Request){
		"refused": code(400), "forbidden": code(403),
		"redirected": func(w http.ResponseWriter, r *http.Request) { http.Redirect(w, r, other.URL, http.StatusFound) },
	} {
		s, calls := hook(t, answer)
		if err := webhook(t, s.URL+"/secret-path").Tell(t.Context(), message()); err == nil || calls.Load() != 1 {
			t.Errorf("%s: %v after %d tries", name, err, calls.Load())
		} else if strings.Contains(err.Error(), "secret-path") {
			t.Errorf("%s: the error shows the address: %v", name, err)
		}
	}
	if reached.Load() != 0 {
		t.Error("a redirect was followed")
	}
	ctx, stop := context.WithTimeout(t.Context(), 100*time.Millisecond)
	defer stop()
	s, _ := hook(t, code(500))
	if err := webhook(t, s.URL).Tell(ctx, message()); err == nil {
		t.Error("a failing server was called success")
	}
}

func TestWebhookShowsItsToken(t *testing.T) {
	file := filepath.Join(t.TempDir(), "token")
	if err := os.WriteFile(file, []byte("tok-1\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	var head, body string
	s, _ := hook(t, func(w http.ResponseWriter, r *http.Request) {
		b, _ := io.ReadAll(r.Body)
		head, body = r.Header.Get("Authorization")+" "+r.Header.Get("Content-Type"), string(b)
	})
	w := webhook(t, s.URL)
	w.TokenFile = file
	if err := w.Tell(t.Context(), message()); err != nil {
		t.Fatal(err)
	}
	if head != "Bearer tok-1 application/json" || !json.Valid([]byte(body)) {
		t.Errorf("sent %q and %q", head, body)
	}
	if strings.Contains(w.Name(), "tok-1") {
		t.Error("the name shows the token")
	}
}

type fake struct {
	mu   sync.Mutex
	got  []Message
	err  error
	hold chan struct{}
}

func (f *fake) Name() string { return "fake" }

func (f *fake) Tell(ctx context.Context, m Message) error {
	if f.hold != nil {
		select {
		case <-f.hold:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	f.mu.Lock()
	defer f.mu.Unlock()
	f.got = append(f.got, m)
	return f.err
}

func (f *fake) count() int { f.mu.Lock(); defer f.mu.Unlock(); return len(f.got) }

// One way that hangs holds up neither the caller nor another way.
func TestOutboxNeverWaits(t *testing.T) {
	var logged bytes.Buffer
	stuck, fine := &fake{hold: make(chan struct{})}, &fake{err: errors.New("line busy")}
	o := NewOutbox(slog.New(slog.NewTextHandler(&logged, nil)), stuck, fine)
	ctx, stop := context.WithCancel(t.Context())
	done := make(chan struct{})
	go func() { o.Run(ctx); close(done) }()
	for range mostQueued + 5 {
		o.Put(message())
		time.Sleep(time.Millisecond)
	}
	for deadline := time.Now().Add(5 * time.Second); fine.count() < mostQueued+5; time.Sleep(time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("the other way told %d of %d", fine.count(), mostQueued+5)
		}
	}
	stop()
	<-done
	if stuck.count() != 0 || !strings.Contains(logged.String(), "too many wait") || !strings.Contains(logged.String(), "line busy") {
		t.Errorf("told %d; the log says %s", stuck.count(), logged.String())
	}
}
