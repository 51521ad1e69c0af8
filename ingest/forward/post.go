package forward

import (
	"bytes"
	"context"
	"encoding/base64"
	"fmt"
	"io"
	"net/http"
	"strconv"
	"strings"
	"time"

	"github.com/klauspost/compress/gzip"
)

// verdict is what an answer means.
type verdict int

const (
	taken    verdict = iota // 204
	tooLarge                // 413
	poison                  // 400, 422: some line is not accepted
	busy                    // 429, 503: come again
	broken                  // other 5xx, time-outs, no connection
	refused                 // 401, 403, 404 and what is no answer of such a server
)

// answer is a server's, with its words.
type answer struct {
	verdict verdict
	words   string
	after   time.Duration // what Retry-After asks for, 0 for nothing
}

// mostWords bounds what is kept of a server's words, bytes.
const mostWords = 2000

// newClient makes a client that follows no redirect: a POST would come out of
// it as a GET, and its 200 would look like success.
func newClient() *http.Client {
	return &http.Client{
		Timeout:       60 * time.Second,
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse },
	}
}

func basic(userPassword string) string {
	return base64.StdEncoding.EncodeToString([]byte(userPassword))
}

// post sends one body of lines, gzipped.
func (f *Forwarder) post(ctx context.Context, lines []byte) answer {
	f.packed.Reset()
	f.zip.Reset(&f.packed)
	if _, err := f.zip.Write(lines); err != nil {
		panic(err) // a buffer takes everything
	}
	if err := f.zip.Close(); err != nil {
		panic(err)
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, f.o.Target.URL.String(), bytes.NewReader(f.packed.Bytes()))
	if err != nil {
		panic(err) // the target was parsed
	}
	req.Header.Set("Content-Type", "text/plain; charset=utf-8")
	req.Header.Set("Content-Encoding", "gzip")
	if f.o.Program != "" {
		req.Header.Set("User-Agent", f.o.Program)
	}
	if f.o.Target.auth != "" {
		req.Header.Set("Authorization", f.o.Target.auth)
	}
	resp, err := f.client.Do(req)
	if err != nil {
		return answer{verdict: broken, words: f.clean(err.Error())}
	}
	defer resp.Body.Close()
	body, _ := io.ReadAll(io.LimitReader(resp.Body, mostWords))
	_, _ = io.Copy(io.Discard, io.LimitReader(resp.Body, 1<<20)) // so that the connection can be used again
	a := answer{words: f.clean(fmt.Sprintf("%s %s", resp.Status, strings.TrimSpace(string(body)))), after: retryAfter(resp.Header.Get("Retry-After"), time.Now())}
	switch code := resp.StatusCode; {
	case code == http.StatusNoContent:
		a.verdict = taken
	case code == http.StatusRequestEntityTooLarge:
		a.verdict = tooLarge
	case code == http.StatusBadRequest, code == http.StatusUnprocessableEntity:
		a.verdict = poison
	case code == http.StatusTooManyRequests, code == http.StatusServiceUnavailable:
		a.verdict = busy
	case code >= 500, code == http.StatusRequestTimeout:
		a.verdict = broken
	default:
		a.verdict = refused
		if code < 400 {
			a.words = "not an answer of a line-protocol server, which says 204: " + a.words
		}
	}
	return a
}

func (f *Forwarder) clean(s string) string { return Clean(s, f.o.Target.auth) }

// Clean makes a server's words fit to be printed: on one line, without the
// secret of the Authorization header, which they may repeat.
func Clean(s, authorization string) string {
	if kind, secret, ok := strings.Cut(authorization, " "); ok {
		s = strings.ReplaceAll(s, secret, "(token)")
		if plain, err := base64.StdEncoding.DecodeString(secret); err == nil && kind == "Basic" {
			s = strings.ReplaceAll(s, string(plain), "(token)")
		}
	}
	return strings.Join(strings.Fields(strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(s, "\uFFFD"))), " ")
}

// retryAfter reads seconds or a date (RFC 9110, section 10.2.3), within a day.
func retryAfter(text string, now time.Time) time.Duration {
	d := time.Duration(0)
	if n, err := strconv.Atoi(strings.TrimSpace(text)); err == nil {
		d = time.Duration(min(n, 86400)) * time.Second
	} else if t, err := http.ParseTime(text); err == nil {
		d = t.Sub(now)
	}
	return max(0, min(d, 24*time.Hour))
}

func newZip() *gzip.Writer {
	w, err := gzip.NewWriterLevel(io.Discard, gzip.BestSpeed)
	if err != nil {
		panic(err) // the level is valid
	}
	return w
}
