package alarm

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"
	"strconv"
	"strings"
	"time"

	"github.com/cenkalti/backoff/v5"
)

// Webhook tells by posting the message as JSON. It tries again with growing
// waits, obeys Retry-After, and follows no redirect.
type Webhook struct {
	URL string
	// TokenFile holds a bearer token, read at each try so that it can be
	// replaced; empty: none is sent.
	TokenFile string
	// For bounds all tries together; 0: six hours.
	For time.Duration
	// First is the first wait between tries; 0: two seconds.
	First time.Duration
	// Client does the requests; nil: one with a time-out of 20 s.
	Client *http.Client
}

// Name is the address's host: its path may be a secret.
func (w *Webhook) Name() string {
	u, err := url.Parse(w.URL)
	if err != nil {
		return "webhook"
	}
	return "webhook at " + u.Host
}

// Tell posts until the answer is 2xx, an answer says that trying again is
// useless, or time is up.
func (w *Webhook) Tell(ctx context.Context, m Message) error {
	body, err := json.Marshal(m)
	if err != nil {
		return err
	}
	waits := backoff.NewExponentialBackOff()
	waits.InitialInterval, waits.MaxInterval = 2*time.Second, 5*time.Minute
	if w.First > 0 {
		waits.InitialInterval = w.First
	}
	total := w.For
	if total == 0 {
		total = 6 * time.Hour
	}
	_, err = backoff.Retry(ctx, func() (struct{}, error) { return struct{}{}, w.post(ctx, body) },
		backoff.WithBackOff(waits), backoff.WithMaxElapsedTime(total))
	return err
}

func (w *Webhook) client() *http.Client {
	if w.Client != nil {
		return w.Client
	}
	return &http.Client{Timeout: 20 * time.Second}
}

func (w *Webhook) post(ctx context.Context, body []byte) error {
	r, err := http.NewRequestWithContext(ctx, http.MethodPost, w.URL, bytes.NewReader(body))
	if err != nil {
		return backoff.Permanent(fmt.Errorf("the webhook's address is wrong"))
	}
	r.Header.Set("Content-Type", "application/json")
	if w.TokenFile != "" {
		token, err := os.ReadFile(w.TokenFile)
		if err != nil {
			return err
		}
		r.Header.Set("Authorization", "Bearer "+strings.TrimSpace(string(token)))
	}
	client := *w.client()
	client.CheckRedirect = func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }
	answer, err := client.Do(r)
	if err != nil {
		if u, ok := err.(*url.Error); ok {
			err = u.Err // without the address, whose path may be a secret
		}
		return err
	}
	defer answer.Body.Close()
	_, _ = io.CopyN(io.Discard, answer.Body, 64<<10) // so that the connection can be used again
	switch code := answer.StatusCode; {
	case code >= 200 && code < 300:
		return nil
	case code == http.StatusTooManyRequests || code == http.StatusServiceUnavailable:
		if s, err := strconv.Atoi(answer.Header.Get("Retry-After")); err == nil && s > 0 {
			return backoff.RetryAfter(min(s, 3600))
		}
		return fmt.Errorf("the server answered %d", code)
	case code >= 500 || code == http.StatusRequestTimeout:
		return fmt.Errorf("the server answered %d", code)
	default:
		return backoff.Permanent(fmt.Errorf("the server refused with %d", code))
	}
}
