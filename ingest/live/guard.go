package live

import (
	"crypto/rand"
	"crypto/sha256"
	"crypto/subtle"
	"encoding/hex"
	"fmt"
	"net"
	"net/http"
	"os"
	"slices"
	"strings"
)

// shortestToken is the least length of a token, in characters.
const shortestToken = 16

// cookieName holds the proof that the token was given.
const cookieName = "gaugelog-page"

// policy is what the browser may do: nothing that does not come from here.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self'; connect-src 'self'; " +
	"form-action 'self'; frame-ancestors 'none'; base-uri 'none'"

// NewToken makes a random token of 128 bits.
func NewToken() string { return strings.ToLower(rand.Text()) }

// ReadToken reads a token from a file: its first line.
func ReadToken(path string) (string, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return "", err
	}
	line, _, _ := strings.Cut(string(b), "\n")
	token := strings.TrimSpace(line)
	if len(token) < shortestToken {
		return "", fmt.Errorf("%s: the token has %d characters, at least %d are needed", path, len(token), shortestToken)
	}
	return token, nil
}

// guard decides who may ask for what.
type guard struct {
	token  [32]byte // its SHA-256, so that lengths cannot be compared by time
	cookie string
	open   bool
	names  []string
	origin *http.CrossOriginProtection
}

func newGuard(token string, open bool, names []string) *guard {
	mark := sha256.Sum256([]byte("gaugelog page cookie\x00" + token))
	return &guard{token: sha256.Sum256([]byte(token)), cookie: hex.EncodeToString(mark[:]), open: open, names: names, origin: http.NewCrossOriginProtection()}
}

// host reports whether the request asks for this page by a name that is its
// own. An address in digits cannot be bent by a foreign name server.
func (g *guard) host(r *http.Request) bool {
	host := r.Host
	if h, _, err := net.SplitHostPort(host); err == nil {
		host = h
	}
	host = strings.TrimSuffix(strings.TrimPrefix(host, "["), "]")
	if ip := net.ParseIP(host); ip != nil {
		return g.open || ip.IsLoopback()
	}
	return slices.ContainsFunc(g.names, func(n string) bool { return strings.EqualFold(n, host) })
}

// right reports whether the text is the token.
func (g *guard) right(text string) bool {
	sum := sha256.Sum256([]byte(text))
	return subtle.ConstantTimeCompare(sum[:], g.token[:]) == 1
}

// known reports whether the request shows the token, by cookie or as a bearer.
func (g *guard) known(r *http.Request) bool {
	if bearer, ok := strings.CutPrefix(r.Header.Get("Authorization"), "Bearer "); ok {
		return g.right(bearer)
	}
	c, err := r.Cookie(cookieName)
	return err == nil && subtle.ConstantTimeCompare([]byte(c.Value), []byte(g.cookie)) == 1
}

// admit sets the cookie, for a season: tests last for months.
func (g *guard) admit(w http.ResponseWriter) {
	http.SetCookie(w, &http.Cookie{Name: cookieName, Value: g.cookie, Path: "/", MaxAge: 90 * 24 * 3600, HttpOnly: true, SameSite: http.SameSiteStrictMode})
}

// dismiss takes it back.
func (g *guard) dismiss(w http.ResponseWriter) {
	http.SetCookie(w, &http.Cookie{Name: cookieName, Path: "/", MaxAge: -1, HttpOnly: true, SameSite: http.SameSiteStrictMode})
}

// wrap puts the checks that every request passes in front of a handler.
func (g *guard) wrap(next http.Handler) http.Handler {
	checked := g.origin.Handler(next)
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", policy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "no-referrer")
		h.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		h.Set("Cache-Control", "no-store")
		if !g.host(r) {
			http.Error(w, "this page is not served under that name", http.StatusMisdirectedRequest)
			return
		}
		r.Body = http.MaxBytesReader(w, r.Body, largestBody)
		checked.ServeHTTP(w, r)
	})
}
