package desk_test

import (
	"context"
	"log/slog"
	"strings"
	"sync"
	"testing"

	"gaugelog/device"
	"gaugelog/ingest/alarm"
)

var discard = slog.New(slog.DiscardHandler)

var reading = device.Reading{Kind: device.Indication, Gauge: "mid", MM: 1}

func contextOf(t *testing.T) (context.Context, context.CancelFunc) {
	t.Helper()
	return context.WithCancel(context.Background())
}

// teller is a messenger that remembers.
type teller struct {
	mu    sync.Mutex
	texts []string
}

func (t *teller) Name() string { return "teller" }

func (t *teller) Tell(_ context.Context, m alarm.Message) error {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.texts = append(t.texts, m.Text)
	return nil
}

func (t *teller) text() string {
	t.mu.Lock()
	defer t.mu.Unlock()
	return strings.Join(t.texts, "\n")
}
