package devicetest

import (
	"bufio"
	"bytes"
	"context"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"
	"sync"
	"time"

	"gaugelog/config"
	"gaugelog/device"
)

// A capture is a text file of what went over one or more ports, one event a
// line, so that it can be read, edited and kept as a fixture:
//
//	# gaugelog capture 1
//	0.000000 open p0
//	0.012345 < p0 2b3030312e3233340d0a
//	0.512000 > p0 3f0d
//	9.000000 lost p0
//
// The first column is seconds since the capture began. "<" is bytes from the
// instrument, ">" bytes to it, in hex; "open" is a successful opening, "lost"
// a Read that found the port gone. Lines that begin with # are comments. Port
// names hold no blanks.
const captureHead = "# gaugelog capture 1"

// Record wraps an opener and writes what passes to W as a capture. Errors of
// W are kept for Err: a failing file must not disturb the measurement.
type Record struct {
	Opener device.Opener
	W      io.Writer

	mu    sync.Mutex
	began time.Time
	err   error
}

// Err returns the first error of writing the capture.
func (r *Record) Err() error {
	r.mu.Lock()
	defer r.mu.Unlock()
	return r.err
}

func (r *Record) note(what, name string, p []byte) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.began.IsZero() {
		r.began = time.Now()
		_, r.err = fmt.Fprintln(r.W, captureHead)
	}
	if r.err != nil {
		return
	}
	line := fmt.Sprintf("%.6f %s %s", time.Since(r.began).Seconds(), what, name)
	if p != nil {
		line += " " + hex.EncodeToString(p)
	}
	_, r.err = fmt.Fprintln(r.W, line)
}

// Open implements device.Opener.
func (r *Record) Open(ctx context.Context, name string, line config.Line) (device.Port, error) {
	p, err := r.Opener.Open(ctx, name, line)
	if err != nil {
		return nil, err
	}
	r.note("open", name, nil)
	return &recorded{Port: p, r: r, name: name}, nil
}

type recorded struct {
	device.Port
	r    *Record
	name string
}

func (p *recorded) Read(b []byte) (int, error) {
	n, err := p.Port.Read(b)
	if n > 0 {
		p.r.note("<", p.name, b[:n])
	}
	if errors.Is(err, device.ErrUnplugged) {
		p.r.note("lost", p.name, nil)
	}
	return n, err
}

func (p *recorded) Write(b []byte) (int, error) {
	n, err := p.Port.Write(b)
	if n > 0 {
		p.r.note(">", p.name, b[:n])
	}
	return n, err
}

// event is one line of a capture.
type event struct {
	at   time.Duration
	what string
	p    []byte
}

// Playback is an opener that plays a capture: each port gives the bytes the
// instrument sent, each at its time after the opening or, where they answered
// a question, once the question was asked again in the same bytes.
type Playback struct {
	mu    sync.Mutex
	ports map[string][]event
	wrong error
}

// NewPlayback reads a capture. The error names the line that is none of its.
func NewPlayback(r io.Reader) (*Playback, error) {
	b := &Playback{ports: map[string][]event{}}
	lines := bufio.NewScanner(r)
	lines.Buffer(nil, 1<<20)
	for n := 1; lines.Scan(); n++ {
		text := lines.Text()
		if n == 1 && text != captureHead {
			return nil, fmt.Errorf("capture:1: the first line is not %q", captureHead)
		}
		if strings.HasPrefix(text, "#") || text == "" {
			continue
		}
		if err := b.add(strings.Fields(text)); err != nil {
			return nil, fmt.Errorf("capture:%d: %w", n, err)
		}
	}
	return b, lines.Err()
}

func (b *Playback) add(f []string) error {
	if len(f) < 3 {
		return errors.New("too few columns")
	}
	seconds, err := strconv.ParseFloat(f[0], 64)
	if err != nil {
		return fmt.Errorf("%q is no time", f[0])
	}
	e := event{at: time.Duration(seconds * float64(time.Second)), what: f[1]}
	switch {
	case (e.what == "<" || e.what == ">") && len(f) == 4:
		if e.p, err = hex.DecodeString(f[3]); err != nil {
			return err
		}
	case (e.what == "open" || e.what == "lost") && len(f) == 3:
	default:
		return fmt.Errorf("%q with %d columns is no event", e.what, len(f))
	}
	b.ports[f[2]] = append(b.ports[f[2]], e)
	return nil
}

// Left tells what was not played: an error if a question differed from the
// capture's, or if events are left over.
func (b *Playback) Left() error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.wrong != nil {
		return b.wrong
	}
	for name, events := range b.ports {
		if len(events) > 0 {
			return fmt.Errorf("port %s: %d events were not played, next %q %q", name, len(events), events[0].what, events[0].p)
		}
	}
	return nil
}

// Open implements device.Opener: it takes the port's next "open" event.
func (b *Playback) Open(_ context.Context, name string, _ config.Line) (device.Port, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	events := b.ports[name]
	if len(events) == 0 || events[0].what != "open" {
		return nil, fmt.Errorf("the capture opens %s no further: %w", name, device.ErrUnplugged)
	}
	b.ports[name] = events[1:]
	return &played{b: b, name: name, began: time.Now(), from: events[0].at, closed: make(chan struct{}), wrote: make(chan struct{}, 1)}, nil
}

type played struct {
	b      *Playback
	name   string
	began  time.Time
	from   time.Duration
	once   sync.Once
	closed chan struct{}
	wrote  chan struct{}
	rest   []byte
}

// next takes the port's next event if it is of the kind wanted.
func (p *played) next(kinds string) (event, bool) {
	p.b.mu.Lock()
	defer p.b.mu.Unlock()
	events := p.b.ports[p.name]
	if len(events) == 0 || !strings.Contains(kinds, events[0].what) {
		return event{}, false
	}
	p.b.ports[p.name] = events[1:]
	return events[0], true
}

func (p *played) Read(b []byte) (int, error) {
	if len(p.rest) == 0 {
		e, ok := p.next("< lost")
		if !ok {
			return 0, p.sleep(readTimeout, true)
		}
		if err := p.sleep(time.Until(p.began.Add(e.at-p.from)), false); errors.Is(err, device.ErrClosed) {
			return 0, err
		}
		if e.what == "lost" {
			return 0, device.ErrUnplugged
		}
		p.rest = e.p
	}
	n := copy(b, p.rest)
	p.rest = p.rest[n:]
	return n, nil
}

// sleep waits; quietly cut short by Close, or by a write where asked to be.
func (p *played) sleep(d time.Duration, untilWrite bool) error {
	wrote := p.wrote
	if !untilWrite {
		wrote = nil
	}
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-p.closed:
		return device.ErrClosed
	case <-timer.C:
	case <-wrote:
	}
	return device.ErrQuiet
}

func (p *played) Write(b []byte) (int, error) {
	e, ok := p.next(">")
	p.b.mu.Lock()
	if p.b.wrong == nil && ok && !bytes.Equal(e.p, b) {
		p.b.wrong = fmt.Errorf("port %s: asked %q, the capture has %q", p.name, b, e.p)
	}
	p.b.mu.Unlock()
	select {
	case p.wrote <- struct{}{}:
	default:
	}
	return len(b), nil
}

func (p *played) Drain() error { p.rest = nil; return nil }

func (p *played) Close() error {
	p.once.Do(func() { close(p.closed) })
	return nil
}
