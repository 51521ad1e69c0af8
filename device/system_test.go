//go:build unix

package device_test

import (
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/creack/pty"
	"go.uber.org/goleak"
	"golang.org/x/sys/unix"
	"golang.org/x/term"

	"gaugelog/config"
	"gaugelog/device"
)

var line8N1 = config.Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1"}

// openPTY gives the gauge's end of a pseudo-terminal and the path of the
// program's end.
func openPTY(t testing.TB) (*os.File, string) {
	t.Helper()
	master, slave, err := pty.Open()
	if err != nil {
		t.Skip("no pseudo-terminals here:", err)
	}
	// Raw from the start: no echo before the program opens it.
	if _, err := term.MakeRaw(int(slave.Fd())); err != nil {
		t.Fatal(err)
	}
	path := slave.Name()
	slave.Close()
	t.Cleanup(func() { master.Close() })
	return master, path
}

func opener(t testing.TB) device.SystemOpener { return device.SystemOpener{LockDir: t.TempDir()} }

func openPort(t testing.TB, o device.SystemOpener, path string) device.Port {
	t.Helper()
	p, err := o.Open(context.Background(), path, line8N1)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { p.Close() })
	return p
}

// Rows 1, 8 and the table of errors: quiet, unplugged and closed are three.
func TestSystemPortErrors(t *testing.T) {
	defer goleak.VerifyNone(t)
	o := opener(t)
	master, path := openPTY(t)
	p := openPort(t, o, path)
	buf := make([]byte, 64)
	if n, err := p.Read(buf); n != 0 || !errors.Is(err, device.ErrQuiet) {
		t.Errorf("quiet line: %d, %v", n, err)
	}
	master.WriteString("12.345\r\n")
	if n, err := p.Read(buf); string(buf[:n]) != "12.345\r\n" || err != nil {
		t.Errorf("read %q, %v", buf[:n], err)
	}
	master.Close()
	for range 3 {
		if n, err := p.Read(buf); n != 0 || !errors.Is(err, device.ErrUnplugged) {
			t.Errorf("unplugged: %d, %v", n, err)
		}
	}
	if _, err := p.Write([]byte("?")); !errors.Is(err, device.ErrUnplugged) {
		t.Errorf("write after unplugging: %v", err)
	}
	if err := p.Close(); err != nil {
		t.Error(err)
	}
	if _, err := p.Read(buf); !errors.Is(err, device.ErrClosed) {
		t.Errorf("read after close: %v", err)
	}
	if _, err := o.Open(context.Background(), path, line8N1); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("reopening a port that is gone: %v", err)
	}
}

func TestCloseWakesReader(t *testing.T) {
	defer goleak.VerifyNone(t)
	_, path := openPTY(t)
	p := openPort(t, opener(t), path)
	got := make(chan error)
	go func() {
		for {
			if _, err := p.Read(make([]byte, 8)); !errors.Is(err, device.ErrQuiet) {
				got <- err
				return
			}
		}
	}()
	p.Close()
	if err := <-got; !errors.Is(err, device.ErrClosed) {
		t.Error(err)
	}
}

// Row 23: a write after Close must not reach the file that got the number.
func TestNoWriteAfterClose(t *testing.T) {
	_, path := openPTY(t)
	p := openPort(t, opener(t), path)
	p.Close()
	var files []*os.File
	for range 16 { // one of them reuses the port's descriptor
		f, err := os.Create(filepath.Join(t.TempDir(), "data"))
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		files = append(files, f)
	}
	if _, err := p.Write([]byte("QUERY\r")); !errors.Is(err, device.ErrClosed) {
		t.Errorf("write after close: %v", err)
	}
	if err := p.Drain(); !errors.Is(err, device.ErrClosed) {
		t.Errorf("drain after close: %v", err)
	}
	for _, f := range files {
		if info, _ := f.Stat(); info.Size() != 0 {
			t.Error("bytes for the port landed in a file")
		}
	}
}

// Row 20: the second opener is told who holds the port.
func TestHeldPortNamesHolder(t *testing.T) {
	o := opener(t)
	_, path := openPTY(t)
	p := openPort(t, o, path)
	_, err := o.Open(context.Background(), path, line8N1)
	if !errors.Is(err, device.ErrHeld) || !strings.Contains(err.Error(), "process") ||
		!strings.Contains(err.Error(), filepath.Base(os.Args[0])) {
		t.Errorf("second opener: %v", err)
	}
	// A program of ours that keeps its locks elsewhere meets the lock on the device.
	if _, err := opener(t).Open(context.Background(), path, line8N1); !errors.Is(err, device.ErrHeld) {
		t.Errorf("opener with other locks: %v", err)
	}
	p.Close()
	again, err := o.Open(context.Background(), path, line8N1)
	if err != nil {
		t.Fatalf("after the holder closed: %v", err)
	}
	again.Close()
}

// Row 24: a process with over 1024 descriptors gets an error, not a panic.
func TestHighDescriptorsRefused(t *testing.T) {
	var limit unix.Rlimit
	if err := unix.Getrlimit(unix.RLIMIT_NOFILE, &limit); err != nil || limit.Cur < 1200 {
		t.Skipf("only %d descriptors allowed", limit.Cur)
	}
	o := opener(t)
	_, path := openPTY(t)
	var files []*os.File
	for range 1100 {
		f, err := os.Open(os.DevNull)
		if err != nil {
			t.Fatal(err)
		}
		files = append(files, f)
	}
	_, err := o.Open(context.Background(), path, line8N1)
	for _, f := range files {
		f.Close()
	}
	if err == nil || !strings.Contains(err.Error(), "too many open files") {
		t.Errorf("opening above 1024: %v", err)
	}
	openPort(t, o, path) // and the refusal left no lock behind
}

func TestLineSettings(t *testing.T) {
	master, path := openPTY(t)
	l := config.Line{Baud: 4800, DataBits: 7, Parity: "even", StopBits: "2", DTR: "on", RTS: "off"}
	p, err := opener(t).Open(context.Background(), path, l)
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	checkTermios(t, master)
	for _, bad := range []config.Line{
		{Baud: 7, DataBits: 8, Parity: "none", StopBits: "1"},
		{Baud: 9600, DataBits: 9, Parity: "none", StopBits: "1"},
		{Baud: 9600, DataBits: 8, Parity: "some", StopBits: "1"},
		{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "3"},
	} {
		_, path := openPTY(t)
		if p, err := opener(t).Open(context.Background(), path, bad); err == nil {
			p.Close()
			t.Errorf("%+v was accepted", bad)
		}
	}
	plain := filepath.Join(t.TempDir(), "plain")
	os.WriteFile(plain, []byte("data"), 0o644)
	if _, err := opener(t).Open(context.Background(), plain, line8N1); err == nil || !strings.Contains(err.Error(), "no serial port") {
		t.Errorf("a plain file: %v", err)
	}
}

// Row 21: a line that takes no bytes gives an error within bounds.
func TestBlockedWrite(t *testing.T) {
	_, path := openPTY(t)
	p := openPort(t, opener(t), path)
	big := make([]byte, 1024)
	for range 1000 {
		if _, err := p.Write(big); err != nil {
			if !strings.Contains(err.Error(), "took no bytes") {
				t.Error(err)
			}
			return
		}
	}
	t.Error("a megabyte went into a line nobody reads")
}

// The whole road over a real pseudo-terminal: stream, unplug, come back under
// another name behind the same identity (rows 1, 2, 9).
func TestBankOverPTY(t *testing.T) {
	defer goleak.VerifyNone(t)
	dir := t.TempDir()
	link := filepath.Join(dir, "gauge")
	master, path := openPTY(t)
	os.Symlink(path, link)
	r := rig(1, signed)
	r.Gauges[0].Port = link
	var l log
	t.Run("run", func(t *testing.T) {
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: opener(t), Sink: &l,
			Backoff: device.Backoff{First: 5 * time.Millisecond, Longest: 20 * time.Millisecond}})
		for _, c := range []byte("+001.000\r\n+002.000\r\n") {
			master.Write([]byte{c})
		}
		wait(t, b, link, 20)
		old := path
		spare, _ := openPTY(t) // so that the number is not given again
		defer spare.Close()
		master.Close()
		os.Remove(link)
		master, path = openPTY(t)
		if path == old {
			t.Log("the pseudo-terminal came back under its old name")
		}
		for len(l.of(device.PortLost)) == 0 {
			time.Sleep(time.Millisecond)
		}
		os.Symlink(path, link)
		master.WriteString("+003.000\r\n")
		wait(t, b, link, 30)
	})
	var got []float64
	for _, r := range l.of(device.Indication) {
		got = append(got, r.MM)
	}
	if len(got) != 3 || got[2] != 3 || len(l.of(device.PortLost)) != 1 || len(l.of(device.PortBack)) != 1 {
		t.Errorf("%+v", l.all())
	}
}

func wait(t *testing.T, b *device.Bank, port string, n int64) {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), 5*time.Second)
	defer cancel()
	if err := b.WaitConsumed(ctx, port, n); err != nil {
		t.Fatalf("%d of %d bytes consumed: %v", b.Consumed(port), n, err)
	}
}

// Row 18: a line that echoes (a tty with ECHO on behaves like a half-duplex
// bus): our own request is recognised, dropped and counted.
func TestEchoOverPTY(t *testing.T) {
	defer goleak.VerifyNone(t)
	master, path := openPTY(t)
	r := rig(1, askedFrame(20*time.Millisecond, 500*time.Millisecond))
	r.Gauges[0].Port = path
	var l log
	var gauge sync.WaitGroup
	gauge.Go(func() {
		buf := make([]byte, 64)
		for {
			n, err := master.Read(buf)
			if errors.Is(err, os.ErrClosed) {
				return
			}
			if err != nil { // nobody has the other end open
				time.Sleep(time.Millisecond)
				continue
			}
			master.Write(append(append([]byte(nil), buf[:n]...), "+001.500\r\n"...))
		}
	})
	t.Run("run", func(t *testing.T) {
		b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: opener(t), Sink: &l})
		wait(t, b, path, 5*12)
		if s := b.Stats()[0]; s.Echoes < 5 || s.Refused != 0 {
			t.Errorf("%+v", s)
		}
	})
	master.Close()
	gauge.Wait()
	if got := l.of(device.Indication); len(got) < 5 || got[0].MM != 1.5 {
		t.Errorf("%+v", l.all())
	}
}
