//go:build unix

package terminal

import (
	"bytes"
	"context"
	"errors"
	"os"
	"regexp"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/creack/pty"
	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// feed is a source that gives what it is handed, until told to end.
type feed struct {
	frames chan Frame
	end    chan error
}

func (f *feed) Run(ctx context.Context, give func(Frame)) error {
	for {
		select {
		case fr := <-f.frames:
			give(fr)
		case err := <-f.end:
			return err
		case <-ctx.Done():
			return nil
		}
	}
}

func (f *feed) See(context.Context, int, string) error { return nil }

// shown is a view on a pseudo-terminal, with what was written to it.
type shown struct {
	*feed
	master *os.File
	ended  chan error
	stop   context.CancelFunc

	mu      sync.Mutex
	written bytes.Buffer
}

func (s *shown) text() string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.written.String()
}

// forget lets go of what was written up to now.
func (s *shown) forget() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.written.Reset()
}

func (s *shown) until(t *testing.T, want string) {
	t.Helper()
	for deadline := time.Now().Add(10 * time.Second); !strings.Contains(s.text(), want); time.Sleep(10 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("never %q; written was %q", want, s.text())
		}
	}
}

func show(t *testing.T, environ ...string) *shown {
	t.Helper()
	master, slave, err := pty.Open()
	if err != nil {
		t.Fatal(err)
	}
	if err := pty.Setsize(master, &pty.Winsize{Rows: 24, Cols: 80}); err != nil {
		t.Fatal(err)
	}
	s := &shown{feed: &feed{make(chan Frame), make(chan error)}, master: master, ended: make(chan error, 1)}
	var reading sync.WaitGroup
	reading.Go(func() {
		buffer := make([]byte, 4096)
		for {
			n, err := master.Read(buffer)
			s.mu.Lock()
			s.written.Write(buffer[:n])
			s.mu.Unlock()
			if err != nil {
				return
			}
		}
	})
	ctx, stop := context.WithCancel(context.Background())
	s.stop = stop
	showing := make(chan struct{})
	go func() {
		defer close(showing)
		s.ended <- Show(ctx, s.feed, Options{In: slave, Out: slave, Environ: append([]string{"TERM=xterm-256color"}, environ...)})
	}()
	t.Cleanup(func() {
		stop()
		<-showing
		_ = slave.Close()
		_ = master.Close()
		reading.Wait()
	})
	return s
}

func (s *shown) wait(t *testing.T) error {
	t.Helper()
	select {
	case err := <-s.ended:
		return err
	case <-time.After(10 * time.Second):
		t.Fatal("it does not end")
		return nil
	}
}

// The view fills the terminal, follows its size, obeys keys, and gives the
// terminal back as it was.
func TestShowOnATerminal(t *testing.T) {
	s := show(t)
	frames := day(t, 2, nil)
	s.frames <- frames[0]
	s.until(t, "Slat 3, larch")
	s.until(t, "\x1b[?1049h") // the other screen
	s.until(t, "Is it alive?")
	if codes := coloursIn(s.text()); !codes["32"] || !codes["43"] {
		t.Errorf("nothing is green, or nothing yellow: %v", codes)
	}
	s.forget()
	if err := pty.Setsize(s.master, &pty.Winsize{Rows: 15, Cols: 40}); err != nil {
		t.Fatal(err)
	}
	if err := syscall.Kill(os.Getpid(), syscall.SIGWINCH); err != nil { // as a terminal of its own would
		t.Fatal(err)
	}
	s.until(t, "Travel left?")
	s.forget()
	if _, err := s.master.WriteString("\x1b[C"); err != nil { // the right arrow
		t.Fatal(err)
	}
	s.until(t, "Sag against log time")
	if _, err := s.master.WriteString("q"); err != nil {
		t.Fatal(err)
	}
	if err := s.wait(t); err != nil {
		t.Error(err)
	}
	s.until(t, "\x1b[?1049l")
}

// NO_COLOR leaves colours out and words in.
func TestNoColour(t *testing.T) {
	s := show(t, "NO_COLOR=1")
	s.frames <- day(t, 1, nil)[0]
	s.until(t, "[abnormal]")
	s.until(t, "q quit")
	s.stop()
	if err := s.wait(t); err != nil {
		t.Error(err)
	}
	if codes := coloursIn(s.text()); len(codes) > 0 {
		t.Errorf("colours were written in spite of NO_COLOR: %v", codes)
	}
}

// coloursIn lists the colours that a text sets (ECMA-48, SGR 30 to 49 and 90 to 107).
func coloursIn(text string) map[string]bool {
	out := map[string]bool{}
	for _, look := range regexp.MustCompile(`\x1b\[([0-9;]*)m`).FindAllStringSubmatch(text, -1) {
		for code := range strings.SplitSeq(look[1], ";") {
			if n, err := strconv.Atoi(code); err == nil && (n >= 30 && n < 50 || n >= 90 && n < 108) {
				out[code] = true
			}
		}
	}
	return out
}

// The end of the source ends the view with its error; frames that come faster
// than they are drawn wait for nobody for long.
func TestTheSourceEnds(t *testing.T) {
	s := show(t)
	for _, f := range day(t, 2000, nil) {
		s.frames <- f
	}
	s.until(t, "Is it alive?")
	gone := errors.New("the page has gone")
	s.end <- gone
	if err := s.wait(t); !errors.Is(err, gone) {
		t.Errorf("the error is %v", err)
	}
}
