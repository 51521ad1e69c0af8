package terminals

import (
	"context"
	"sync"
	"time"

	"gaugelog/simulators"
)

// Live runs a simulation in real time on pseudo-terminals.
type Live struct {
	sim  simulators.Source
	bank *Bank
	// Event, if set before Run, is called for every event of the schedule,
	// with the path a port came back under. It must not block for long.
	Event func(e simulators.Event, path string)

	mu      sync.Mutex // guards sim and began
	began   time.Time
	ctx     context.Context
	started chan struct{}
	replies sync.WaitGroup // answers that are still to be sent
}

// NewLive opens a pseudo-terminal for every port of the simulation, which
// should have been made with Options.Asked. Close must be called.
func NewLive(sim simulators.Source) (*Live, error) {
	l := &Live{sim: sim, started: make(chan struct{})}
	var names []string
	for _, p := range sim.Ports() {
		names = append(names, p.Name)
	}
	bank, err := Open(names, l.answer)
	if err != nil {
		return nil, err
	}
	l.bank = bank
	return l, nil
}

// Terminals lists the ports' names and paths.
func (l *Live) Terminals() []Terminal { return l.bank.Terminals() }

// Close closes the terminals and waits for what is still to be answered. Run
// must have returned.
func (l *Live) Close() error {
	err := l.bank.Close()
	l.replies.Wait()
	return err
}

// Run streams until the context ends (nil) or the simulation does (nil). It
// must be called once. Requests are answered from then on; an answer that is
// late does not keep others on its port waiting. In real time the recorder's
// power cuts are silences of all lines.
func (l *Live) Run(ctx context.Context) error {
	l.mu.Lock()
	l.began, l.ctx = time.Now(), ctx
	l.mu.Unlock()
	close(l.started)
	timer := time.NewTimer(0)
	defer timer.Stop()
	for {
		select {
		case <-ctx.Done():
			return nil
		case <-timer.C:
		}
		done, wait, err := l.turn()
		if err != nil || done {
			return err
		}
		timer.Reset(wait)
	}
}

// turn sends what is due and says how long nothing is.
func (l *Live) turn() (done bool, wait time.Duration, err error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	now := int64(time.Since(l.began))
	st := l.sim.Next(now+1, 0)
	for _, b := range st.Batches {
		l.put(b.Index, b.Bytes)
	}
	for _, e := range st.Events {
		path := ""
		for i, t := range l.bank.Terminals() {
			if t.Name != e.Port {
				continue
			}
			switch e.Kind {
			case simulators.Unplugged:
				// The schedule goes on whatever closing said.
				_ = l.bank.Unplug(i)
			case simulators.Plugged:
				if path, err = l.bank.Plug(i); err != nil {
					return false, 0, err
				}
			}
		}
		if l.Event != nil {
			l.Event(e, path)
		}
	}
	return st.Done, max(0, time.Duration(l.sim.Due())-time.Since(l.began)), nil
}

// put writes to a port somebody has open; elsewhere the bytes are lost, as on
// a cable nobody reads.
func (l *Live) put(port int, p []byte) {
	if l.bank.Read(port) {
		_ = l.bank.Write(port, p, 100*time.Millisecond)
	}
}

// answer answers requests on one port.
func (l *Live) answer(port int, heard []byte) {
	select {
	case <-l.started:
	default:
		return // not running yet: a gauge that is not switched on
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	if l.ctx.Err() != nil {
		return
	}
	batch := l.sim.Ask(port, heard, int64(time.Since(l.began)))
	if len(batch.Bytes) == 0 {
		return
	}
	reply, wait := append([]byte(nil), batch.Bytes...), time.Duration(batch.Delay)
	l.replies.Go(func() {
		timer := time.NewTimer(wait)
		defer timer.Stop()
		select {
		case <-l.ctx.Done():
		case <-timer.C:
			_ = l.bank.Write(port, reply, 100*time.Millisecond)
		}
	})
}
