package terminal

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"gaugelog/ingest/answer"
)

// Page is the source of a live page elsewhere, over its stream.
type Page struct {
	at     *url.URL // of the run, with its last slash
	token  string
	client *http.Client
}

// Figures of the stream.
const (
	longestEvent = 4 << 20 // bytes
	silentFor    = 40 * time.Second
	firstWait    = time.Second
	longestWait  = 30 * time.Second
	answerWithin = 15 * time.Second
)

// errRefused is an answer that trying again does not change.
type errRefused struct{ text string }

func (e errRefused) Error() string { return e.text }

// OpenPage finds the run behind an address: that of the page of one recording,
// or of one rig of several (ending in /r/NAME/). token may be empty where the
// page is on the same machine; it is needed to mark alarms as seen.
//
// Errors: an address that is none, a server that is no live page, a page of
// several rigs (the error names the form of their addresses), a token refused.
func OpenPage(ctx context.Context, address, token string) (*Page, error) {
	u, err := url.Parse(address)
	if err != nil || u.Scheme != "http" && u.Scheme != "https" || u.Host == "" {
		return nil, fmt.Errorf("%q is no address of a live page, such as http://127.0.0.1:8700/", address)
	}
	p := &Page{at: u, token: token, client: &http.Client{
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse },
	}}
	u.RawQuery, u.Fragment = "", ""
	if u.Path = strings.TrimSuffix(u.Path, "/") + "/"; strings.Contains(u.Path, "/r/") {
		return p, nil
	}
	ctx, stop := context.WithTimeout(ctx, answerWithin)
	defer stop()
	answer, err := p.ask(ctx, http.MethodGet, "", nil)
	if err != nil {
		return nil, err
	}
	defer answer.Body.Close()
	switch answer.StatusCode {
	case http.StatusFound:
		to, err := answer.Location()
		if err != nil || to.Host != u.Host {
			return nil, fmt.Errorf("%s is no live page: it leads elsewhere", address)
		}
		p.at = to
		return p, nil
	case http.StatusUnauthorized:
		return nil, errNeedsToken
	case http.StatusOK:
		return nil, fmt.Errorf("%s shows several rigs; add r/NAME/ to the address, as on their pages", address)
	}
	return nil, fmt.Errorf("%s is no live page: it answered %s", address, answer.Status)
}

var errNeedsToken = errRefused{"the page asks for its token: give --token FILE"}

// ask sends a request with the token.
func (p *Page) ask(ctx context.Context, method, path string, form url.Values) (*http.Response, error) {
	r, err := http.NewRequestWithContext(ctx, method, p.at.JoinPath(path).String(), strings.NewReader(form.Encode()))
	if err != nil {
		return nil, err
	}
	if method == http.MethodPost {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	if p.token != "" {
		r.Header.Set("Authorization", "Bearer "+p.token)
	}
	return p.client.Do(r)
}

// See marks an alarm of the page as seen; it needs the token.
func (p *Page) See(ctx context.Context, id int, by string) error {
	answer, err := p.ask(ctx, http.MethodPost, "seen", url.Values{"alarm": {strconv.Itoa(id)}, "by": {by}})
	if err != nil {
		return err
	}
	defer answer.Body.Close()
	switch answer.StatusCode {
	case http.StatusSeeOther:
		return nil
	case http.StatusForbidden, http.StatusUnauthorized:
		return errNeedsToken
	case http.StatusUnprocessableEntity:
		return errors.New("the alarm is not raised any more")
	}
	return fmt.Errorf("the page answered %s", answer.Status)
}

// Run follows the page and connects again, ever more patiently, when it is lost.
func (p *Page) Run(ctx context.Context, give func(Frame)) error {
	var f Frame
	wait := firstWait
	for {
		err := p.listen(ctx, &f, func() { wait = firstWait; give(f) })
		if ctx.Err() != nil {
			return nil
		}
		var refused errRefused
		if errors.As(err, &refused) {
			return err
		}
		if f.Lost == "" {
			f.Lost = "No connection to the recorder since " + time.Now().Format("15:04:05") + " (" + err.Error() + ")"
			give(f)
		}
		select {
		case <-ctx.Done():
			return nil
		case <-time.After(wait):
		}
		wait = min(2*wait, longestWait)
	}
}

// listen takes one stream's events into f until it breaks off.
func (p *Page) listen(ctx context.Context, f *Frame, give func()) error {
	ctx, stop := context.WithCancel(ctx)
	defer stop()
	quiet := time.AfterFunc(silentFor, stop) // a stream that says nothing at all is dead
	defer quiet.Stop()
	got, err := p.ask(ctx, http.MethodGet, "follow", nil)
	if err != nil {
		return err
	}
	defer got.Body.Close()
	switch got.StatusCode {
	case http.StatusOK:
	case http.StatusUnauthorized:
		return errNeedsToken
	case http.StatusNotFound:
		return errRefused{"the page has no such rig: " + p.at.String()}
	default:
		return fmt.Errorf("the page answered %s", got.Status)
	}
	lines := bufio.NewScanner(got.Body)
	lines.Buffer(make([]byte, 0, 64<<10), longestEvent)
	name := ""
	for lines.Scan() {
		quiet.Reset(silentFor)
		line := lines.Bytes()
		if kind, ok := bytes.CutPrefix(line, []byte("event: ")); ok {
			name = string(kind)
			continue
		}
		data, ok := bytes.CutPrefix(line, []byte("data: "))
		if !ok {
			continue
		}
		switch name {
		case "figures":
			var figures []answer.Figure
			if err := json.Unmarshal(data, &figures); err != nil {
				return fmt.Errorf("the page's plots cannot be read: %w", err)
			}
			f.Figures = figures
		case "view":
			var v answer.View
			if err := json.Unmarshal(data, &v); err != nil {
				return fmt.Errorf("the page's answers cannot be read: %w", err)
			}
			f.View, f.Lost = v, ""
			give()
		}
	}
	if err := lines.Err(); err != nil {
		return err
	}
	return io.ErrUnexpectedEOF
}
