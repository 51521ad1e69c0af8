package device

import (
	"bytes"
	"errors"
	"time"
)

// poll is the one master of a port: at most one question is open at a time.
type poll struct {
	queue []ask // the conductor's, in order
	state pollState
	now   ask         // the open question; its done is nil for a timed one
	last  *instrument // asked last: its late answers are still recognised
	until time.Time   // end of the pause, or of the wait for the answer
	began time.Time   // when the open question was sent
	dirty bool        // the last question stayed open: a late answer may come
	// patience is the least time an answer is waited for (Options.Patience).
	patience time.Duration

	lastTick, lastBytes, armed time.Time
}

type pollState uint8

const (
	pollIdle pollState = iota
	pollPausing
	pollWriting
	pollWaiting
)

// longestPause bounds the back-off of one gauge that does not answer.
const longestPause = 30 * time.Second

func (l *poll) begin(p *pump, now time.Time) {
	*l = poll{queue: l.queue[:0], lastTick: now, patience: p.o.Patience}
	for _, in := range p.plan.instruments {
		in.due, in.misses = now, 0
	}
}

// abort answers everybody who waits when a session ends.
func (l *poll) abort(err error) {
	if l.state != pollIdle && l.now.done != nil {
		l.now.done <- err
	}
	for _, a := range l.queue {
		a.done <- err
	}
	l.state, l.queue = pollIdle, l.queue[:0]
}

// due is when poll wants to be ticked next; zero: never.
func (l *poll) due(p *pump) time.Time {
	if l.state != pollIdle {
		return l.until
	}
	if in := l.earliest(p); in != nil {
		return in.due
	}
	return time.Time{}
}

// earliest returns the gauge to be asked next; nil where none is asked by time.
func (l *poll) earliest(p *pump) *instrument {
	if p.o.Conducted {
		return nil
	}
	var first *instrument
	for _, in := range p.plan.instruments {
		if in.asked() && (first == nil || in.due.Before(first.due)) {
			first = in
		}
	}
	return first
}

// tick moves on what is due at now.
func (l *poll) tick(p *pump, now time.Time, w *writer) error {
	switch {
	case l.state == pollIdle:
		l.next(p, now, w)
	case now.Before(l.until):
	case l.state == pollPausing:
		l.send(p, now, w)
	case l.state == pollWriting:
		return errors.New("the line takes no bytes")
	default:
		p.echo.giveUp(p)
		if l.state == pollWaiting {
			p.quiet() // what came of an answer by now is all of it
		}
		if l.state == pollWaiting {
			l.dirty = true
			l.end(ErrQuiet)
		}
		l.next(p, now, w)
	}
	return nil
}

// silence gives back what was held as an echo, when the line is quiet by the
// conductor's word while a question is open.
func (l *poll) silence(p *pump) {
	if l.state == pollWaiting || l.state == pollWriting {
		p.echo.giveUp(p)
	}
}

// close ends a question that the whole of what was sent has not answered.
func (l *poll) close() {
	if l.state == pollWaiting || l.state == pollWriting {
		l.dirty = true
		l.end(ErrQuiet)
	}
}

// next begins the next question if none is open and one is due.
func (l *poll) next(p *pump, now time.Time, w *writer) {
	if l.state != pollIdle {
		return
	}
	if len(l.queue) > 0 {
		l.now = l.queue[0]
		l.queue = l.queue[:copy(l.queue, l.queue[1:])]
	} else if in := l.earliest(p); in != nil && !in.due.After(now) {
		l.now = ask{in: in}
	} else {
		return
	}
	pause := l.pause(p)
	if pause == 0 {
		l.send(p, now, w)
		return
	}
	l.state, l.until = pollPausing, now.Add(pause)
}

// pause is how long the line rests before the next question, so that an
// answer that comes late is not taken for the next gauge's: the turn-around on
// a shared line, and a further time-out after a question that stayed open
// where answers do not say whose they are.
func (l *poll) pause(p *pump) time.Duration {
	switch {
	case p.o.Conducted:
		return 0
	case l.dirty && len(p.plan.instruments) > 1 && l.last != nil && !toldApart(l.last, l.now.in):
		return l.last.timeout
	case l.dirty || len(p.plan.instruments) > 1:
		return p.o.TurnAround
	}
	return 0
}

// send asks: what came before is thrown away.
func (l *poll) send(p *pump, now time.Time, w *writer) {
	in := l.now.in
	request := in.request
	for _, s := range p.slots {
		if s.asked != nil {
			s.reset(p.received)
		}
		if s.asked == in && s.unidentified() {
			request = s.identity.request
		}
	}
	l.dirty, l.last, l.began = false, in, now
	l.state, l.until = pollWriting, now.Add(max(in.timeout, time.Second, l.patience))
	p.echo.expect(request)
	select {
	case <-w.wrote: // of a question whose answer was faster than this news
	default:
	}
	w.requests <- request
}

// written starts the wait for the answer.
func (l *poll) written(now time.Time) {
	if l.state == pollWriting {
		l.state, l.until = pollWaiting, now.Add(max(l.now.in.timeout, l.patience))
	}
}

// expects reports whether the instrument's answer is being waited for.
func (l *poll) expects(in *instrument) bool {
	return (l.state == pollWaiting || l.state == pollWriting) && l.now.in == in
}

// answered ends the open question with the instrument's answer.
func (l *poll) answered(in *instrument, err error) {
	if l.expects(in) {
		l.end(err)
	}
}

// end closes the open question and sets when the gauge is asked again: at its
// interval, or, each time it stays silent, after twice as long.
func (l *poll) end(err error) {
	in := l.now.in
	now := time.Now()
	if errors.Is(err, ErrQuiet) {
		in.misses++
	} else {
		in.misses = 0
	}
	step := in.every
	for range min(in.misses, 16) {
		if step < longestPause {
			step = min(2*step, max(longestPause, in.every))
		}
	}
	if in.due = in.due.Add(step); in.due.Before(now) {
		in.due = now
		if in.misses > 0 {
			in.due = now.Add(step)
		}
	}
	l.state = pollIdle
	if l.now.done != nil {
		l.now.done <- err
	}
	l.now = ask{}
}

// writer is the goroutine that writes on an open port, apart because a write
// may block for as long as the line is stuck.
type writer struct {
	requests chan []byte
	wrote    chan error
	quit     chan struct{}
}

// write starts a writer where the port has somebody to ask.
func (p *pump) write(port Port) *writer {
	w := &writer{requests: make(chan []byte, 1), wrote: make(chan error, 1), quit: make(chan struct{})}
	for _, in := range p.plan.instruments {
		if in.asked() {
			go w.run(port)
			break
		}
	}
	return w
}

func (w *writer) run(port Port) {
	for {
		select {
		case request := <-w.requests:
			err := writeAll(port, request)
			select {
			case w.wrote <- err:
			case <-w.quit:
				return
			}
		case <-w.quit:
			return
		}
	}
}

func writeAll(port Port, b []byte) error {
	for len(b) > 0 {
		n, err := port.Write(b)
		if err == nil && n == 0 {
			err = errors.New("the line takes no bytes")
		}
		if err != nil {
			return err
		}
		b = b[n:]
	}
	return nil
}

// echo drops our own request where a half-duplex line sends it back: only
// when all of it comes, from the first byte after it was written.
type echo struct {
	request []byte
	n       int
	waiting bool
}

func (e *echo) expect(request []byte) { *e = echo{request: request, waiting: true} }

// strip returns the bytes of b that are no echo.
func (e *echo) strip(p *pump, b []byte) []byte {
	if !e.waiting {
		return b
	}
	n := 0
	for n < len(b) && e.n+n < len(e.request) && b[n] == e.request[e.n+n] {
		n++
	}
	e.n += n
	switch {
	case e.n == len(e.request):
		e.waiting = false
		p.echoes.Add(1)
		p.received += int64(e.n)
		for _, s := range p.slots {
			s.reset(p.received)
		}
		return b[n:]
	case n < len(b):
		// It was no echo: what was held back comes before the rest.
		held := e.n - n
		e.waiting = false
		if held > 0 {
			p.feed(bytes.Clone(e.request[:held]))
		}
		return b
	}
	return nil
}

// giveUp gives back bytes held as the beginning of an echo that stayed short.
func (e *echo) giveUp(p *pump) {
	if e.waiting && e.n > 0 {
		e.waiting = false
		p.feed(bytes.Clone(e.request[:e.n]))
	}
	e.waiting = false
}
