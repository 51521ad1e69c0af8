package device

import (
	"context"
	"sync"
	"sync/atomic"
)

// meter counts consumed bytes and wakes whoever waits for them.
type meter struct {
	n       atomic.Int64
	waiting atomic.Int32
	mu      sync.Mutex
	moved   chan struct{} // closed at the next step
}

func (m *meter) add(n int) {
	m.n.Add(int64(n))
	if m.waiting.Load() == 0 {
		return
	}
	m.mu.Lock()
	if m.moved != nil {
		close(m.moved)
		m.moved = nil
	}
	m.mu.Unlock()
}

// wait returns once the count is at least n, or with the context's error.
func (m *meter) wait(ctx context.Context, n int64) error {
	if m.n.Load() >= n {
		return nil
	}
	m.waiting.Add(1)
	defer m.waiting.Add(-1)
	for {
		m.mu.Lock()
		if m.moved == nil {
			m.moved = make(chan struct{})
		}
		moved := m.moved
		m.mu.Unlock()
		if m.n.Load() >= n {
			return nil
		}
		select {
		case <-moved:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}
