package live

import (
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"os"
	"regexp"
	"strings"
	"testing"
	"time"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

func TestPathsThatLeadElsewhere(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	for _, path := range []string{"/../../etc/passwd", "/r/..%2f..%2fetc/", "/r/%2e%2e/%2e%2e/etc/passwd", "/page.html", "/page.css/../../server.go", "/r/other/", "/r/slat-3/../../rig.yaml", "/r/slat-3/rig.yaml", "/.recorder.lock"} {
		c, err := net.Dial("tcp", strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/"))
		if err != nil {
			t.Fatal(err)
		}
		fmt.Fprintf(c, "GET %s HTTP/1.1\r\nHost: localhost\r\nConnection: close\r\n\r\n", path)
		b, _ := io.ReadAll(c)
		c.Close()
		if code := string(b[:min(12, len(b))]); strings.HasSuffix(code, "200") || strings.Contains(string(b), "root:") || strings.Contains(string(b), "specimen:") {
			t.Errorf("%s: %s", path, code)
		}
	}
}

func TestWhatTheBrowserMayDo(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	for _, path := range []string{home, "/page.js", "/page.css", "/nothing", "/r/other/"} {
		a, body := w.visit(t, "GET", path, nil, nil)
		csp := a.Header.Get("Content-Security-Policy")
		for _, want := range []string{"default-src 'none'", "script-src 'self'", "frame-ancestors 'none'", "base-uri 'none'", "form-action 'self'"} {
			if !strings.Contains(csp, want) {
				t.Errorf("%s: the policy %q lacks %s", path, csp, want)
			}
		}
		if strings.Contains(csp, "unsafe") {
			t.Errorf("%s: the policy %q allows inline code", path, csp)
		}
		if a.Header.Get("X-Content-Type-Options") != "nosniff" || a.Header.Get("Referrer-Policy") != "no-referrer" {
			t.Errorf("%s: headers %v", path, a.Header)
		}
		if path == home && regexp.MustCompile(`(?i)<script[^>]*>[^<]|<style|\sstyle=|\son[a-z]+=|javascript:`).MatchString(body) {
			t.Error("the page holds inline code or styles, which its policy forbids")
		}
		if path == home && regexp.MustCompile(`(src|href|action)="(https?:)?//`).MatchString(body) {
			t.Error("the page needs something from elsewhere")
		}
	}
}

// A gauge, a rig file and a visitor may say anything; it is shown as text.
func TestHostileTexts(t *testing.T) {
	t.Parallel()
	const evil = `<script>alert(1)</script>"><img src=x onerror=alert(2)>'&`
	world := desktest.New(t, desktest.Options{Title: evil, Outlook: func(*desktest.World) *desk.Outlook {
		return &desk.Outlook{At: time.Now().UnixNano(), Gauge: evil, Stage: evil, Rate: new(float64),
			Forecasts:    []desk.Forecast{{After: evil, Refused: evil}},
			Disturbances: []desk.Disturbance{{Kind: "bench-knock", Gauges: []string{evil}, From: time.Now().UnixNano(), Treated: evil}}}
	}})
	w := serve(t, world, false)
	world.SetStatus(evil)
	form := url.Values{"kind": {"note"}, "note": {evil}, "by": {evil}, "at": {fmt.Sprint(time.Now().UnixNano())}, "once": {evil}}
	for _, path := range []string{home + "ask", home + "mark"} {
		if a, body := w.visit(t, "POST", path, form, bearer); a.StatusCode >= 400 || strings.Contains(body, "<script>alert") || strings.Contains(body, "<img") {
			t.Errorf("%s: %d\n%s", path, a.StatusCode, body)
		}
	}
	bad := url.Values{"kind": {"step"}, "step": {evil}}
	if a, body := w.visit(t, "POST", home+"ask", bad, bearer); a.StatusCode != 422 || strings.Contains(body, "<script>alert") {
		t.Errorf("a step of that name: %d", a.StatusCode)
	}
	deadline := time.Now().Add(8 * time.Second)
	for {
		_, body := w.visit(t, "GET", home+"?done="+url.QueryEscape(evil), nil, bearer)
		if strings.Contains(body, "<script>alert") || strings.Contains(body, "<img") {
			t.Fatal("a foreign text became markup")
		}
		if strings.Count(body, "&lt;script&gt;alert(1)") >= 8 { // title twice, status thrice, note, by, outlook
			break
		}
		if time.Now().After(deadline) {
			t.Fatalf("the texts are not all shown:\n%s", body)
		}
		time.Sleep(100 * time.Millisecond)
	}
}

func TestFormsThatAreTooLarge(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	form := url.Values{"kind": {"note"}, "note": {strings.Repeat("x", largestBody+1)}}
	if a, _ := w.visit(t, "POST", home+"ask", form, bearer); a.StatusCode != http.StatusBadRequest {
		t.Errorf("a form of %d bytes: %d", largestBody, a.StatusCode)
	}
}

// A client that sends its head a letter at a time is cut off.
func TestSlowHeads(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	if w.http.ReadHeaderTimeout > 10*time.Second || w.http.ReadTimeout == 0 || w.http.WriteTimeout == 0 || w.http.IdleTimeout == 0 || w.http.MaxHeaderBytes > 64<<10 {
		t.Fatal("a time-out or a bound is missing")
	}
	c, err := net.Dial("tcp", strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/"))
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	began := time.Now()
	for _, b := range []byte("GET / HTTP/1.1\r\nHost: localhost\r\nX: " + strings.Repeat("y", 200)) {
		if _, err := c.Write([]byte{b}); err != nil {
			break
		}
		time.Sleep(50 * time.Millisecond)
		if time.Since(began) > headerWithin+time.Second {
			break
		}
	}
	_ = c.SetReadDeadline(time.Now().Add(3 * time.Second))
	if _, err := io.ReadAll(c); err != nil && errors.Is(err, os.ErrDeadlineExceeded) {
		t.Errorf("after %s a slow client is still connected", time.Since(began))
	}
}
