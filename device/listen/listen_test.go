package listen_test

import (
	"context"
	"errors"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
	"gaugelog/device/guess"
	"gaugelog/device/listen"
)

var line = config.Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1"}

// A streaming instrument is heard at the first setting, and nothing is sent.
func TestStreaming(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		go func() {
			defer close(done)
			for ctx.Err() == nil {
				wire.Send([]byte("+001.234\r\n"))
				time.Sleep(250 * time.Millisecond)
			}
		}()
		var said []string
		p, all, err := listen.Options{Opener: opener, Port: "p", Say: func(s string) { said = append(said, s) }}.Guess(ctx)
		stop()
		<-done
		if err != nil || len(p) == 0 || p[0].Frame.Kind != "text" || len(all) != 1 {
			t.Fatalf("%v %+v, %d captures", err, p, len(all))
		}
		if len(said) != 2 || !strings.Contains(said[0], "8 line settings (at most 24s)") || !strings.Contains(said[1], "9600 baud, 8N1") {
			t.Errorf("said %q", said)
		}
		select {
		case b := <-wire.Asked():
			t.Errorf("it was sent %q", b)
		default:
		}
	})
}

// Where frames are found it goes on watching, and what is seen only then is in
// the proposal.
func TestWatch(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		go func() {
			defer close(done)
			for i := 0; ctx.Err() == nil; i++ {
				if i < 24 {
					wire.Send([]byte("+001.234\r\n"))
				} else {
					wire.Send([]byte("-000.034\r\n"))
				}
				time.Sleep(250 * time.Millisecond)
			}
		}()
		p, all, err := listen.Options{Opener: opener, Port: "p", Watch: 10 * time.Second}.Guess(ctx)
		stop()
		<-done
		if err != nil || len(p) == 0 || len(all) != 1 || !strings.Contains(strings.Join(p[0].Sure, ";"), "a sign always stands") {
			t.Fatalf("%v %+v, %d captures", err, p, len(all))
		}
	})
}

// setOpener knows the setting that its port was last opened with.
type setOpener struct {
	*devicetest.Opener
	line atomic.Pointer[config.Line]
}

func (o *setOpener) Open(ctx context.Context, name string, l config.Line) (device.Port, error) {
	o.line.Store(&l)
	return o.Opener.Open(ctx, name, l)
}

// A streamer with eight data bits and odd parity makes no frames at a setting
// without parity, and is found with it.
func TestHeardWithParity(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &setOpener{Opener: &devicetest.Opener{}}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		go func() {
			defer close(done)
			for ctx.Err() == nil {
				if l := opener.line.Load(); l != nil && l.Baud == 4800 && l.Parity == "odd" {
					wire.Send([]byte("+001.234\r\n"))
				} else {
					wire.Send([]byte{0x00, 0xB0, 0x00, 0x96, 0xB1, 0xFF})
				}
				time.Sleep(250 * time.Millisecond)
			}
		}()
		p, _, err := listen.Options{Opener: opener, Port: "p"}.Guess(ctx)
		stop()
		<-done
		if err != nil || len(p) == 0 || p[0].Frame.Kind != "text" || p[0].Frame.Line.Parity != "odd" || p[0].Frame.Line.Baud != 4800 {
			t.Fatalf("%v %+v", err, p)
		}
	})
}

// The answer to *IDN? is told and never taken for an indication; a Modbus
// instrument with even parity is asked with even parity.
func TestAskedWithParity(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		var said []string
		go func() {
			defer close(done)
			for {
				select {
				case b := <-wire.Asked():
					if string(b) == guess.Identify {
						wire.Send([]byte("A,B,1.25,4.5\n"))
					}
				case <-ctx.Done():
					return
				}
			}
		}()
		p, _, err := listen.Options{Opener: opener, Port: "p", Say: func(s string) { said = append(said, s) }}.Guess(ctx)
		stop()
		<-done
		words := strings.Join(said, "\n")
		if err != nil || len(p) != 0 {
			t.Fatalf("%v %+v", err, p)
		}
		for _, want := range []string{`it answers "A,B,1.25,4.5"`, "19200 baud, 8E1", "4800 baud, 7E1"} {
			if !strings.Contains(words, want) {
				t.Errorf("%q was not said:\n%s", want, words)
			}
		}
	})
}

// One that answers only READ? is found, and each request is announced before
// it is sent.
func TestAsked(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		var said sync.Map // announced in one goroutine, looked up in another
		go func() {
			defer close(done)
			for {
				select {
				case b := <-wire.Asked():
					if _, yes := said.Load(string(b)); !yes {
						t.Errorf("%q was sent before it was announced", b)
					}
					if string(b) == "READ?\n" {
						time.Sleep(50 * time.Millisecond)
						wire.Send([]byte("+1.2345E+00\n"))
					}
				case <-ctx.Done():
					return
				}
			}
		}()
		o := listen.Options{Opener: opener, Port: "p", Line: line, Fixed: true, Say: func(s string) {
			for _, r := range guess.UsualRequests() {
				if strings.Contains(s, r.Words+" (") {
					said.Store(string(r.Bytes), true)
				}
			}
		}}
		p, _, err := o.Guess(ctx)
		stop()
		<-done
		if err != nil || len(p) == 0 || p[0].Frame.Kind != "scpi" || p[0].Frame.SCPI.Query != "READ?" {
			t.Fatalf("%v %+v", err, p)
		}
	})
}

// Silence gives no proposal, and no error.
func TestSilence(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		ctx, stop := context.WithCancel(t.Context())
		done := make(chan bool)
		go func() {
			defer close(done)
			for {
				select {
				case <-wire.Asked():
				case <-ctx.Done():
					return
				}
			}
		}()
		p, _, err := listen.Options{Opener: opener, Port: "p", Line: line, Fixed: true}.Guess(ctx)
		stop()
		<-done
		if err != nil || len(p) != 0 {
			t.Fatalf("%v %+v", err, p)
		}
	})
}

// A cable pulled out ends it with what was heard.
func TestUnplugged(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		wire := opener.Plug("p")
		done := make(chan bool)
		go func() {
			defer close(done)
			time.Sleep(time.Second)
			wire.Send([]byte("+001.234\r\n"))
			time.Sleep(time.Second)
			opener.Unplug("p")
		}()
		var heard int
		c, err := listen.Options{Opener: opener, Port: "p", Line: line, Heard: func(guess.Chunk) { heard++ }}.For(t.Context(), time.Minute)
		<-done
		if !errors.Is(err, device.ErrUnplugged) || string(c.Bytes()) != "+001.234\r\n" || heard == 0 {
			t.Fatalf("%v %q", err, c.Bytes())
		}
		if at := c.Chunks[0].At; at < time.Second || at > 1300*time.Millisecond {
			t.Errorf("arrived at %s, sent after 1 s", at)
		}
	})
}
