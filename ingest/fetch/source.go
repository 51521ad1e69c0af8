package fetch

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strings"
	"time"

	"gaugelog/ingest/forward"
)

// Source is where and as whom to read.
type Source struct {
	address *url.URL
	export  bool
	auth    string
	client  *http.Client
}

// ParseSource reads the whole address of a query interface, such as
// http://host:8086/query?db=lab or http://host:8428/api/v1/export. token and
// plain are as those of forward.ParseTarget.
func ParseSource(address, token string, plain bool) (*Source, error) {
	u, err := url.Parse(address)
	if err != nil || u.Host == "" || u.Scheme != "http" && u.Scheme != "https" {
		return nil, errors.New("the address is no http or https URL")
	}
	if err := forward.ShowsNothing(u); err != nil {
		return nil, err
	}
	s := &Source{address: u, client: &http.Client{
		Transport:     &http.Transport{Proxy: http.ProxyFromEnvironment, ResponseHeaderTimeout: 2 * time.Minute, IdleConnTimeout: time.Minute},
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse },
	}}
	switch {
	case strings.HasSuffix(u.Path, "/api/v1/export"):
		s.export = true
	case !strings.HasSuffix(u.Path, "/query"):
		return nil, fmt.Errorf("path %q is none to read from: /query?db=NAME or /api/v1/export", u.Path)
	case !u.Query().Has("db"):
		return nil, errors.New("the address names no database: /query?db=NAME")
	}
	s.auth, err = forward.Authorization(u, token, plain)
	return s, err
}

// String is the address without a token: fit to be shown.
func (s *Source) String() string { return s.address.Redacted() }

// get asks at a path of the server (with the address's own path cut off) and
// returns the answer's body, which the caller closes.
func (s *Source) get(ctx context.Context, cut, path string, q url.Values) (io.ReadCloser, error) {
	u := *s.address
	u.Path = strings.TrimSuffix(u.Path, cut) + path
	all := u.Query()
	for k, v := range q {
		all[k] = v
	}
	u.RawQuery = all.Encode()
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, u.String(), nil)
	if err != nil {
		return nil, err
	}
	if s.auth != "" {
		req.Header.Set("Authorization", s.auth)
	}
	resp, err := s.client.Do(req)
	if err != nil {
		var bad *url.Error
		if errors.As(err, &bad) { // its text would repeat the whole query
			err = bad.Err
		}
		return nil, fmt.Errorf("%s: %w", s, err)
	}
	if resp.StatusCode == http.StatusOK {
		return resp.Body, nil
	}
	words, _ := io.ReadAll(io.LimitReader(resp.Body, 500))
	resp.Body.Close()
	return nil, s.says(resp.Status + " " + string(words))
}

// says tells the server's words, without the token that they may repeat.
func (s *Source) says(words string) error {
	return fmt.Errorf("%s: the server says %s", s, forward.Clean(words, s.auth))
}

// point is one point of the run, without the tags run and rig.
type point struct {
	measurement string
	tags        []tag
	fields      []field
	at          int64 // ns since 1970 UTC
}

type tag struct{ key, value string }

type field struct {
	key   string
	value any // string, float64, int64, bool
}

// measurements are those of a run folder, the many first.
var measurements = []string{"indication", "ambient", "load", "note", "touch", "withdraw", "event", "step"}

// reader gives the points of a run.
type reader interface {
	// runs lists the runs that the server holds of a rig ("" for all).
	runs(ctx context.Context, rig string) ([]string, error)
	// points hands over the points of one measurement in order of time.
	points(ctx context.Context, run, measurement string, take func(*point) error) error
	// loses says in words what the server does not hold, "" for nothing.
	loses() string
}

func (s *Source) reader() reader {
	if s.export {
		return &exported{s: s}
	}
	return &queried{s: s}
}
