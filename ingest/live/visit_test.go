package live

import (
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"gaugelog/ingest"
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
