package forward

import (
	"bytes"
	"context"
	"fmt"
	"time"
)

// mostRefused is how many lines in a row the server may refuse before it is
// taken to refuse everything.
const mostRefused = 100

// send sends lines until the server has taken each, or refused it alone. It
// fails only with the context or the disk.
func (f *Forwarder) send(ctx context.Context, lines []byte) error {
	for len(lines) > 0 {
		n := f.cut(lines)
		if err := f.sendBody(ctx, lines[:n]); err != nil {
			return err
		}
		lines = lines[n:]
	}
	return nil
}

// cut returns the length of the next body: whole lines, as many as may go at once.
func (f *Forwarder) cut(lines []byte) int {
	end, count := 0, 0
	for end < len(lines) && count < f.o.Lines {
		i := bytes.IndexByte(lines[end:], '\n')
		if i < 0 {
			panic("forward: a line without its end")
		}
		if end > 0 && end+i+1 > f.bytes {
			break
		}
		end += i + 1
		count++
	}
	return end
}

// sendBody sends one body, halving it as the server's answers ask.
func (f *Forwarder) sendBody(ctx context.Context, body []byte) error {
	f.pause.Reset()
	for {
		a := f.post(ctx, body)
		if err := ctx.Err(); err != nil && a.verdict != taken {
			return err
		}
		half := middle(body)
		switch a.verdict {
		case taken:
			f.count.Sent += int64(bytes.Count(body, []byte{'\n'}))
			f.refusals = 0
			f.tell(Notice{})
			return nil
		case tooLarge:
			if half > 0 {
				f.bytes = max(len(body)/2, 1024)
				return f.halves(ctx, body, half)
			}
			return f.setAside(body, a.words)
		case poison:
			if f.refusals < mostRefused {
				if half > 0 {
					return f.halves(ctx, body, half)
				}
				f.refusals++
				return f.setAside(body, a.words)
			}
			a.words = fmt.Sprintf("the last %d lines were all refused, so nothing more is set aside: %s", mostRefused, a.words)
			a.verdict = refused
		}
		if err := f.wait(ctx, a); err != nil {
			return err
		}
	}
}

// wait waits as an answer asks, and tells why.
func (f *Forwarder) wait(ctx context.Context, a answer) error {
	d := f.pause.NextBackOff()
	if a.verdict == refused {
		d = max(d, f.o.Hold)
	}
	if a.verdict == busy && a.after > 0 {
		d = a.after
	}
	if f.count.Retries++; a.verdict == refused && f.o.Token != nil {
		if token, err := f.o.Token(); err != nil {
			a.words += "; the token cannot be read again: " + err.Error()
		} else if err := f.o.Target.Renew(token); err != nil {
			a.words += "; the token as it is now: " + err.Error()
		}
	}
	f.behind()
	f.tell(Notice{Held: a.verdict == refused, Words: a.words, Wait: d})
	return f.o.Wait(ctx, d)
}

func (f *Forwarder) halves(ctx context.Context, body []byte, half int) error {
	if err := f.sendBody(ctx, body[:half]); err != nil {
		return err
	}
	return f.sendBody(ctx, body[half:])
}

// middle is the end of the line nearest behind the middle that leaves lines on
// both sides; 0 where there is one line.
func middle(body []byte) int {
	at := len(body) / 2
	if i := bytes.IndexByte(body[at:len(body)-1], '\n'); i >= 0 {
		return at + i + 1
	}
	return bytes.LastIndexByte(body[:at], '\n') + 1
}

// sleep waits for d or the context.
func sleep(ctx context.Context, d time.Duration) error {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}
