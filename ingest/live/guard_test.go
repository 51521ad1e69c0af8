package live

import (
	"errors"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gaugelog/ingest/desk/desktest"
)

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
