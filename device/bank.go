package device

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"gaugelog/config"
)

// Options says what a [Bank] reads and how. The zero value of each field is
// its documented default.
type Options struct {
	// Rigs are the rigs read at once; they may share ports, buses and probes.
	// At least one.
	Rigs []*config.Rig
	// Opener opens the ports; nil means SystemOpener{}, the real ones.
	Opener Opener
	// Stamper dates the frames; nil means RealClock{}.
	Stamper Stamper
	// Sink takes the readings; required.
	Sink Sink
	// Logger hears of state changes, once each; nil discards.
	Logger *slog.Logger
	// Conducted hands the time to a conductor: gauges are asked by Ask alone,
	// and no port is reopened for silence.
	Conducted bool
	// Patience is how long an answer may take in real time under a conductor,
	// whose machine may be busy with other things; default the frame's time-out.
	Patience time.Duration
	// Backoff paces the attempts to reopen a lost port.
	Backoff Backoff
	// DeafAfter is the silence after which an open port is reopened, where no
	// gauge on it has silent_after (then three times that); default 30 s. It
	// doubles with each vain attempt up to 10 min. Ports whose gauges all
	// send on a button are never deaf.
	DeafAfter time.Duration
	// RefusedEvery is the least time between two FramesRefused readings of a
	// port; default 1 min.
	RefusedEvery time.Duration
	// TurnAround is the pause before a gauge on a shared line is asked, in
	// which late answers are thrown away; default 5 ms.
	TurnAround time.Duration
	// CloseWithin bounds the wait for a port that hangs on closing; default 2 s.
	CloseWithin time.Duration
}

// Backoff is an exponential back-off with jitter.
type Backoff struct {
	First   time.Duration // default 250 ms
	Longest time.Duration // default 10 s
	// Jitter is the share by which a pause is shortened or lengthened at
	// random, 0 to 1; default 0.3, negative for none.
	Jitter float64
}

func (o Options) withDefaults() Options {
	if o.Opener == nil {
		o.Opener = SystemOpener{}
	}
	if o.Stamper == nil {
		o.Stamper = RealClock{}
	}
	if o.Logger == nil {
		o.Logger = slog.New(slog.DiscardHandler)
	}
	for _, d := range []struct {
		to  *time.Duration
		def time.Duration
	}{
		{&o.Backoff.First, 250 * time.Millisecond}, {&o.Backoff.Longest, 10 * time.Second},
		{&o.DeafAfter, 30 * time.Second}, {&o.RefusedEvery, time.Minute},
		{&o.TurnAround, 5 * time.Millisecond}, {&o.CloseWithin, 2 * time.Second},
	} {
		if *d.to == 0 {
			*d.to = d.def
		}
	}
	if o.Backoff.Jitter == 0 {
		o.Backoff.Jitter = 0.3
	}
	o.Backoff.Jitter = max(o.Backoff.Jitter, 0)
	return o
}

// Bank is the pool of ports of one process.
type Bank struct {
	o     Options
	pumps []*pump
	byKey map[string]*pump

	mu     sync.Mutex
	cancel context.CancelFunc
	done   chan struct{}
	closed bool
	tried  chan struct{}
}

// Open checks the options and plans the ports; it opens none of them, Run
// does. The error names the rig, the gauge and what is wrong. A port whose
// identity fits two devices is refused here.
func Open(o Options) (*Bank, error) {
	if len(o.Rigs) == 0 || o.Sink == nil {
		panic("device: Open needs Rigs and a Sink")
	}
	o = o.withDefaults()
	plans, err := planPorts(o.Rigs)
	if err != nil {
		return nil, err
	}
	b := &Bank{o: o, byKey: map[string]*pump{}, done: make(chan struct{}), tried: make(chan struct{})}
	for _, plan := range plans {
		if c, ok := o.Opener.(checker); ok {
			if err := c.Check(plan.name); err != nil {
				return nil, fmt.Errorf("port %s: %w", plan.name, err)
			}
		}
		p, err := newPump(&b.o, plan)
		if err != nil {
			return nil, fmt.Errorf("port %s: %w", plan.name, err)
		}
		b.pumps = append(b.pumps, p)
		b.byKey[plan.name] = p
	}
	return b, nil
}

// checker is an Opener that can tell beforehand that a name will never do.
type checker interface {
	Check(name string) error
}

// Run reads every port until the context ends or Close is called, and returns
// nil when every goroutine it started has ended, or an error that names the
// ports whose drivers would not let go. It may be called once.
func (b *Bank) Run(ctx context.Context) error {
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	b.mu.Lock()
	if b.cancel != nil {
		b.mu.Unlock()
		panic("device: Run called twice")
	}
	b.cancel = cancel
	if b.closed {
		cancel()
	}
	b.mu.Unlock()
	defer close(b.done)

	var wg, first sync.WaitGroup
	for _, p := range b.pumps {
		first.Add(1)
		wg.Go(func() { p.run(ctx, sync.OnceFunc(first.Done)) })
	}
	wg.Go(func() { first.Wait(); close(b.tried) })
	wg.Wait()
	var errs []error
	for _, p := range b.pumps {
		if p.stuck.Load() > 0 {
			errs = append(errs, fmt.Errorf("port %s did not close within %v", p.plan.name, b.o.CloseWithin))
		}
	}
	return errors.Join(errs...)
}

// Close ends Run and waits for it. It may be called at any time, and twice.
func (b *Bank) Close() error {
	b.mu.Lock()
	b.closed = true
	cancel := b.cancel
	b.mu.Unlock()
	if cancel != nil {
		cancel()
		<-b.done
	}
	return nil
}

// Tried is closed once every port was tried, whether it opened or not.
func (b *Bank) Tried() <-chan struct{} { return b.tried }

// Consumed is the number of bytes of the port that are fully dealt with: the
// readings in them were handed to the Sink; 0 for a port no rig names.
func (b *Bank) Consumed(port string) int64 {
	if p := b.byKey[port]; p != nil {
		return p.consumed.n.Load()
	}
	return 0
}

// WaitConsumed waits until Consumed(port) is at least n. With Conducted, n
// must be all that was sent: the line then counts as quiet, so that a frame
// which ends by the gap behind it has been handed over too, and a question
// that is still open ends with ErrQuiet. A port that no rig names is ErrUnknown.
func (b *Bank) WaitConsumed(ctx context.Context, port string, n int64) error {
	p := b.byKey[port]
	if p == nil {
		return fmt.Errorf("port %s: %w", port, ErrUnknown)
	}
	if err := p.consumed.wait(ctx, n); err != nil || !p.o.Conducted {
		return err
	}
	return p.gaps.settle(ctx, b.done, p.asking.Load() > 0)
}

// Ask asks one gauge or probe of a rig now and waits until its answer was
// handed to the Sink (nil), was refused (ErrRefused), did not come within the
// frame's time-out (ErrQuiet) or the port is not open (ErrUnplugged). An
// instrument that sends unasked gives an error at once, and so does one that the
// rig does not have (ErrUnknown). With Conducted it is
// the only way gauges are asked.
func (b *Bank) Ask(ctx context.Context, rig int, name string) error {
	for _, p := range b.pumps {
		for _, in := range p.plan.instruments {
			for _, t := range in.targets {
				if t.rig != rig || (t.gauge != name && t.probe != name) {
					continue
				}
				if !in.asked() {
					return fmt.Errorf("%s is not asked: its frame has no request", name)
				}
				return p.ask(ctx, in)
			}
		}
	}
	return fmt.Errorf("gauge or probe %s: %w", name, ErrUnknown)
}

// ErrUnknown: no rig names such a port, gauge or probe.
var ErrUnknown = errors.New("no rig names it")

// ErrRefused: an answer came, but damaged.
var ErrRefused = errors.New("the answer was refused")

// PortStats are the counters of one port, for metrics and the live page.
type PortStats struct {
	Port string
	// Open is true while the port is open; Answering while frames that count
	// have come since it was last lost.
	Open, Answering bool
	// Bytes, Frames, Refused, Echoes count since Run began: bytes received,
	// frames that counted, frames refused, own requests that came back.
	Bytes, Frames, Refused, Echoes int64
	// Reconnects counts the times the port was opened again.
	Reconnects int64
	// LastFrame is the instant of the last frame that counted; zero if none.
	LastFrame Instant
	// Instruments are the names of the gauges and probes on it.
	Instruments []string
}

// Stats reads the counters of all ports, in the order the rigs name them. It
// may be called at any time from any goroutine and takes no lock.
func (b *Bank) Stats() []PortStats {
	out := make([]PortStats, len(b.pumps))
	for i, p := range b.pumps {
		out[i] = p.stats()
	}
	return out
}
