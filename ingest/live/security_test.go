package live

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

// visit sends a request as a browser of no manners would.
func (s served) visit(t *testing.T, method, path string, form url.Values, change func(*http.Request)) (*http.Response, string) {
	t.Helper()
	var body io.Reader
	if form != nil {
		body = strings.NewReader(form.Encode())
	}
	r, err := http.NewRequest(method, strings.TrimSuffix(s.URL(), "/")+path, body)
	if err != nil {
		t.Fatal(err)
	}
	if form != nil {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	if change != nil {
		change(r)
	}
	transport := &http.Transport{DisableKeepAlives: true}
	defer transport.CloseIdleConnections()
	client := &http.Client{Transport: transport, Timeout: 10 * time.Second,
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}
	answer, err := client.Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	b, err := io.ReadAll(answer.Body)
	if err != nil {
		t.Fatal(err)
	}
	return answer, string(b)
}

func bearer(r *http.Request) { r.Header.Set("Authorization", "Bearer "+testToken) }

const home = "/r/slat-3/"

func TestHostsThatAreNotOurs(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	for _, c := range []struct {
		host string
		code int
	}{
		{"evil.example", 421}, {"evil.example:80", 421}, {"127.0.0.1.evil.example", 421}, {"10.0.0.7", 421}, {"[2001:db8::1]:80", 421},
		{"localhost", 200}, {"LOCALHOST:9", 200}, {"127.0.0.1", 200}, {"[::1]:8700", 200},
	} {
		for _, path := range []string{home, "/page.js"} {
			if a, _ := w.visit(t, "GET", path, nil, func(r *http.Request) { r.Host = c.host }); a.StatusCode != c.code {
				t.Errorf("%s with Host %s: %d, want %d", path, c.host, a.StatusCode, c.code)
			}
		}
	}
}

func note() url.Values {
	return url.Values{"kind": {"note"}, "note": {"hello"}, "at": {fmt.Sprint(time.Now().UnixNano())}, "once": {"abc"}}
}

func (s served) marks(t *testing.T) int {
	t.Helper()
	marks, err := ingest.ListMarks(s.Dir.FS())
	if err != nil {
		t.Fatal(err)
	}
	return len(marks)
}

func TestPostsFromElsewhere(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	for name, change := range map[string]func(*http.Request){
		"foreign origin": func(r *http.Request) { bearer(r); r.Header.Set("Origin", "https://evil.example") },
		"cross-site":     func(r *http.Request) { bearer(r); r.Header.Set("Sec-Fetch-Site", "cross-site") },
		"same-site":      func(r *http.Request) { bearer(r); r.Header.Set("Sec-Fetch-Site", "same-site") },
		"null origin":    func(r *http.Request) { bearer(r); r.Header.Set("Origin", "null") },
		"no token":       func(*http.Request) {},
		"wrong token":    func(r *http.Request) { r.Header.Set("Authorization", "Bearer "+testToken+"x") },
		"part of token":  func(r *http.Request) { r.Header.Set("Authorization", "Bearer "+testToken[:5]) },
		"empty token":    func(r *http.Request) { r.Header.Set("Authorization", "Bearer ") },
		"token as cookie": func(r *http.Request) {
			r.AddCookie(&http.Cookie{Name: cookieName, Value: testToken})
		},
	} {
		for _, path := range []string{home + "mark", home + "ask", home + "seen"} {
			if a, _ := w.visit(t, "POST", path, note(), change); a.StatusCode != http.StatusForbidden {
				t.Errorf("%s at %s: %d, want 403", name, path, a.StatusCode)
			}
		}
	}
	if n := w.marks(t); n != 0 {
		t.Fatalf("%d marks were entered", n)
	}
	if a, _ := w.visit(t, "POST", home+"mark", note(), bearer); a.StatusCode != http.StatusSeeOther || w.marks(t) != 1 {
		t.Fatalf("the right token: %d, %d marks", a.StatusCode, w.marks(t))
	}
	if a, _ := w.visit(t, "POST", home+"mark", note(), bearer); a.StatusCode != http.StatusSeeOther || w.marks(t) != 1 {
		t.Errorf("the same form sent twice: %d, %d marks, want one", a.StatusCode, w.marks(t))
	}
}

func TestLookingChangesNothing(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	for _, path := range []string{home + "mark?" + note().Encode(), home + "ask?" + note().Encode(), home + "seen?alarm=1", "/enter?token=" + testToken, "/leave"} {
		a, _ := w.visit(t, "GET", path, nil, bearer)
		if a.StatusCode != http.StatusMethodNotAllowed && a.StatusCode != http.StatusNotFound {
			t.Errorf("GET %s: %d", path, a.StatusCode)
		}
		if a.Header.Get("Set-Cookie") != "" {
			t.Errorf("GET %s sets a cookie", path)
		}
	}
	if a, _ := w.visit(t, "POST", home+"ask", note(), bearer); a.StatusCode != 200 {
		t.Errorf("asking: %d", a.StatusCode)
	}
	if n := w.marks(t); n != 0 {
		t.Errorf("looking and asking entered %d marks", n)
	}
}

func TestTheTokenOpensTheDoor(t *testing.T) {
	t.Parallel()
	w := serve(t, desktest.New(t, desktest.Options{}), true)
	for _, path := range []string{"/", home, home + "stream", home + "follow"} {
		if a, body := w.visit(t, "GET", path, nil, nil); a.StatusCode != http.StatusUnauthorized || strings.Contains(body, "larch") {
			t.Errorf("%s without the token on an open page: %d", path, a.StatusCode)
		}
	}
	if a, _ := w.visit(t, "POST", "/enter", url.Values{"token": {"wrong-wrong-wrong-wrong"}}, nil); a.StatusCode != http.StatusForbidden || a.Header.Get("Set-Cookie") != "" {
		t.Errorf("a wrong token: %d %s", a.StatusCode, a.Header.Get("Set-Cookie"))
	}
	a, _ := w.visit(t, "POST", "/enter", url.Values{"token": {testToken}, "back": {"//evil.example/"}}, nil)
	cookie := a.Header.Get("Set-Cookie")
	if a.StatusCode != http.StatusSeeOther || a.Header.Get("Location") != "/" {
		t.Errorf("the token leads to %d %s", a.StatusCode, a.Header.Get("Location"))
	}
	for _, want := range []string{"HttpOnly", "SameSite=Strict", "Path=/"} {
		if !strings.Contains(cookie, want) {
			t.Errorf("the cookie %s lacks %s", cookie, want)
		}
	}
	if strings.Contains(cookie, testToken) {
		t.Error("the cookie holds the token itself")
	}
	c := a.Cookies()[0]
	if a, body := w.visit(t, "GET", home, nil, func(r *http.Request) { r.AddCookie(c) }); a.StatusCode != 200 || !strings.Contains(body, "Slat 3, larch") {
		t.Errorf("with the cookie: %d", a.StatusCode)
	}
}

func TestOnlyLoopbackUnlessAsked(t *testing.T) {
	for _, address := range []string{"0.0.0.0:0", ":0", "[::]:0", "192.0.2.1:0", "example.invalid:0"} {
		if s, err := Listen(Options{Address: address, Token: testToken}); !errors.Is(err, ErrNotLoopback) {
			t.Errorf("%s: %v", address, err)
			if s != nil {
				s.Close()
			}
		}
	}
	if _, err := Listen(Options{Address: "127.0.0.1:0", Token: "short"}); err == nil {
		t.Error("a short token was taken")
	}
	file := filepath.Join(t.TempDir(), "token")
	for text, fine := range map[string]bool{"short\n": false, "": false, testToken + "\nsecond line\n": true} {
		if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		if token, err := ReadToken(file); (err == nil) != fine || fine && token != testToken {
			t.Errorf("%q is read as %q, %v", text, token, err)
		}
	}
	if a, b := NewToken(), NewToken(); a == b || len(a) < shortestToken {
		t.Errorf("tokens %q and %q", a, b)
	}
}

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

// A thousand clients that hold streams open leave room for the serial ports,
// whose descriptors must stay below 1,024, and the recording goes on.
func TestManyIdleStreams(t *testing.T) {
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	before := descriptors(t)
	stored := w.Rec.Status().Stored
	address := strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/")
	var conns []net.Conn
	defer func() {
		for _, c := range conns {
			c.Close()
		}
	}()
	open, refused := 0, 0
	for range 1000 {
		c, err := net.Dial("tcp", address)
		if err != nil {
			refused++
			continue
		}
		fmt.Fprintf(c, "GET %sstream HTTP/1.1\r\nHost: localhost\r\n\r\n", home)
		_ = c.SetReadDeadline(time.Now().Add(200 * time.Millisecond))
		line, err := bufio.NewReader(c).ReadString('\n')
		if err != nil {
			c.Close() // the client's own descriptor; the server closed its end
			refused++
			continue
		}
		conns = append(conns, c)
		if strings.Contains(line, " 200 ") {
			open++
		}
	}
	if open != mostStreams {
		t.Errorf("%d streams are open, want %d", open, mostStreams)
	}
	if len(conns) > mostConnections {
		t.Errorf("%d connections are open, want %d at most", len(conns), mostConnections)
	}
	// Both ends are in this process: two descriptors a connection.
	if now := descriptors(t); now-before > 2*mostConnections+16 {
		t.Errorf("%d descriptors more than before", now-before)
	}
	for deadline := time.Now().Add(5 * time.Second); w.Rec.Status().Stored <= stored; time.Sleep(50 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("the recording stands at %d readings", stored)
		}
	}
	t.Logf("%d streams open, %d connections, %d refused", open, len(conns), refused)
}

func descriptors(t *testing.T) int {
	t.Helper()
	d, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skip("descriptors cannot be counted here")
	}
	return len(d)
}

// A stream ends with the server, and its reader with the client.
func TestStreamsEnd(t *testing.T) {
	t.Parallel()
	world := desktest.New(t, desktest.Options{})
	s, err := Listen(Options{Desks: []*desk.Desk{world.Desk}, Address: "127.0.0.1:0", Token: testToken})
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()
	r, err := http.NewRequest("GET", strings.TrimSuffix(s.URL(), "/")+home+"stream", nil)
	if err != nil {
		t.Fatal(err)
	}
	transport := &http.Transport{}
	defer transport.CloseIdleConnections()
	answer, err := (&http.Client{Transport: transport}).Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	lines := bufio.NewReader(answer.Body)
	if line, err := lines.ReadString('\n'); err != nil || line != "event: sections\n" {
		t.Fatalf("the stream begins with %q, %v", line, err)
	}
	stop()
	if err := <-ended; err != nil {
		t.Errorf("the server ended with %v", err)
	}
	if _, err := io.Copy(io.Discard, lines); err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Logf("the stream ended with %v", err)
	}
}

// While many look, load the page again and again, and hold streams open that
// they never read, no reading is lost and none waits: handing one over only ever
// puts it into a queue. The longest hand-over is told, with -v.
func TestReadingsNeverWaitForThePage(t *testing.T) {
	w := serve(t, desktest.New(t, desktest.Options{Still: true}), false)
	ctx, stop := context.WithCancel(t.Context())
	var crowd sync.WaitGroup
	for range mostStreams {
		c, err := net.Dial("tcp", strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/"))
		if err != nil {
			t.Fatal(err)
		}
		defer c.Close()
		fmt.Fprintf(c, "GET %sfollow HTTP/1.1\r\nHost: localhost\r\n\r\n", home)
	}
	var pages atomic.Int64
	for range 4 {
		crowd.Go(func() {
			for ctx.Err() == nil {
				r, err := http.NewRequestWithContext(ctx, "GET", strings.TrimSuffix(w.URL(), "/")+home, nil)
				if err != nil {
					t.Error(err)
					return
				}
				a, err := http.DefaultClient.Do(r)
				if err != nil {
					continue // the test is over, or there were too many at once
				}
				_, _ = io.Copy(io.Discard, a.Body)
				a.Body.Close()
				pages.Add(1)
			}
		})
	}
	const times = 300
	longest := time.Duration(0)
	for range times {
		began := time.Now()
		w.Feed()
		longest = max(longest, time.Since(began))
		time.Sleep(5 * time.Millisecond)
	}
	stop()
	crowd.Wait()
	http.DefaultClient.CloseIdleConnections()
	want := int64(4 * times) // three gauges and a probe
	for deadline := time.Now().Add(10 * time.Second); w.Rec.Status().Stored < want; time.Sleep(50 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("%d of %d readings were stored", w.Rec.Status().Stored, want)
		}
	}
	if s := w.Rec.Status(); s.Stored != want || s.Dropped != 0 || w.Desk.Snapshot().Missed != 0 {
		t.Errorf("%d stored, %d dropped, %d missing on the page", s.Stored, s.Dropped, w.Desk.Snapshot().Missed)
	}
	if pages.Load() == 0 {
		t.Error("no page was loaded meanwhile")
	}
	t.Logf("%d pages loaded; four readings were handed over within %s at the longest", pages.Load(), longest)
}
