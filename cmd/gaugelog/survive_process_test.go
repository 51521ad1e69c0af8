//go:build campaign && linux

package main

import (
	"bytes"
	"flag"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"
)

// The survival tests run the built program against real files and terminals:
//
//	go test -tags campaign -run Survive ./cmd/gaugelog
//
// does the sizes meant for every change. Their flags make them longer.
var surviveSeed = flag.Uint64("survive.seed", 1, "seed of the survival tests")

// needTool skips the test where a program it needs is missing. The whole check
// must not skip anything, and fails.
func needTool(t *testing.T, names ...string) {
	t.Helper()
	for _, name := range names {
		if _, err := exec.LookPath(name); err != nil {
			cannot(t, "needs the program "+name)
		}
	}
}

// needRoot does so where the test needs more rights than an ordinary user has.
func needRoot(t *testing.T) {
	t.Helper()
	if os.Geteuid() != 0 {
		cannot(t, "needs root")
	}
}

func cannot(t *testing.T, why string) {
	t.Helper()
	if os.Getenv("GAUGELOG_CI") == "1" {
		t.Fatal(why + ", and GAUGELOG_CI=1 lets no test skip")
	}
	t.Skip(why)
}

// buildProgram builds gaugelog as it is shipped: static, for this machine.
func buildProgram(t *testing.T) string {
	t.Helper()
	name := filepath.Join(t.TempDir(), "gaugelog")
	c := exec.Command("go", "build", "-o", name, ".")
	c.Env = append(os.Environ(), "CGO_ENABLED=0")
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("building: %v\n%s", err, out)
	}
	return name
}

// process is one running gaugelog.
type process struct {
	*exec.Cmd
	out, err lockedText
	ended    chan struct{}
	result   error
}

// lockedText takes what a process says; it may be read meanwhile.
type lockedText struct {
	mu  sync.Mutex
	buf bytes.Buffer
}

func (l *lockedText) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.buf.Write(p)
}

func (l *lockedText) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.buf.String()
}

// start runs a command line in the background.
func start(t *testing.T, line ...string) *process {
	t.Helper()
	p := &process{Cmd: exec.Command(line[0], line[1:]...), ended: make(chan struct{})}
	p.Stdout, p.Stderr = &p.out, &p.err
	if err := p.Start(); err != nil {
		t.Fatal(err)
	}
	go func() {
		p.result = p.Wait()
		close(p.ended)
	}()
	t.Cleanup(func() {
		p.Process.Kill()
		<-p.ended
	})
	return p
}

// within waits until the process has said text on standard output.
func (p *process) says(t *testing.T, text string, within time.Duration) {
	t.Helper()
	for began := time.Now(); !strings.Contains(p.out.String(), text); time.Sleep(5 * time.Millisecond) {
		select {
		case <-p.ended:
			t.Fatalf("%v ended (%v) before it said %q:\n%s%s", p.Args, p.result, text, p.out.String(), p.err.String())
		default:
		}
		if time.Since(began) > within {
			t.Fatalf("%v did not say %q within %v:\n%s", p.Args, text, within, p.err.String())
		}
	}
}

// end sends the signal and waits for the process.
func (p *process) end(t *testing.T, sig os.Signal) error {
	t.Helper()
	if err := p.Process.Signal(sig); err != nil && err != os.ErrProcessDone {
		t.Fatal(err)
	}
	select {
	case <-p.ended:
	case <-time.After(60 * time.Second):
		t.Fatalf("%v has not ended a minute after %v:\n%s", p.Args, sig, p.err.String())
	}
	return p.result
}

// do runs a command line to its end and wants it to succeed.
func do(t *testing.T, line ...string) string {
	t.Helper()
	out, err := exec.Command(line[0], line[1:]...).CombinedOutput()
	if err != nil {
		t.Fatalf("%v: %v\n%s", line, err, out)
	}
	return string(out)
}
