//go:build unix

package device_test

import (
	"bytes"
	"context"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"

	"go.uber.org/goleak"
	"golang.org/x/term"

	"gaugelog/config"
	"gaugelog/device"
)

// socatPair has another program make and join two pseudo-terminals, so that
// the tty's behaviour is not our own test's idea of it. One end is the
// program's, the other is the gauge's. It is left as the kernel makes it, with
// echo and line editing, where sane is true.
type socatPair struct {
	program, gauge string
	process        *exec.Cmd
}

func socat(t *testing.T, sane bool) *socatPair {
	t.Helper()
	path, err := exec.LookPath("socat")
	if err != nil {
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatal("socat must be installed here: ", err)
		}
		t.Skip("a second opinion on ttys needs socat: ", err)
	}
	dir := t.TempDir()
	p := &socatPair{program: filepath.Join(dir, "program"), gauge: filepath.Join(dir, "gauge")}
	ours := "pty,link=" + p.program
	if !sane {
		ours += ",raw,echo=0"
	}
	p.process = exec.Command(path, ours, "pty,raw,echo=0,link="+p.gauge)
	if err := p.process.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(p.end)
	for deadline := time.Now().Add(10 * time.Second); ; time.Sleep(time.Millisecond) {
		_, one := os.Stat(p.program)
		_, two := os.Stat(p.gauge)
		if one == nil && two == nil {
			return p
		}
		if time.Now().After(deadline) {
			t.Fatal("socat made no terminals: ", errors.Join(one, two))
		}
	}
}

// end kills the other program, which hangs both lines up.
func (p *socatPair) end() {
	if p.process != nil {
		p.process.Process.Kill()
		p.process.Wait()
		p.process = nil
	}
}

// speak opens the gauge's end.
func (p *socatPair) speak(t *testing.T) *os.File {
	t.Helper()
	f, err := os.OpenFile(p.gauge, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	// The link may be there before socat has made its end raw.
	if _, err := term.MakeRaw(int(f.Fd())); err != nil {
		t.Fatal(err)
	}
	return f
}

// readOf reads until n bytes came or five seconds passed.
func readOf(t *testing.T, p device.Port, n int) []byte {
	t.Helper()
	var got []byte
	buf := make([]byte, 512)
	for deadline := time.Now().Add(5 * time.Second); len(got) < n && time.Now().Before(deadline); {
		m, err := p.Read(buf)
		if err != nil && !errors.Is(err, device.ErrQuiet) {
			t.Fatal(err)
		}
		got = append(got, buf[:m]...)
	}
	return got
}

// Opening makes a sane terminal raw: every byte passes unchanged in both
// directions, none is echoed, none edits the line or sends a signal.
func TestSocatRawAndNoEcho(t *testing.T) {
	pair := socat(t, true)
	p := openPort(t, opener(t), pair.program)
	gauge := pair.speak(t)
	every := make([]byte, 256)
	for i := range every {
		every[i] = byte(i)
	}
	if _, err := gauge.Write(every); err != nil {
		t.Fatal(err)
	}
	if got := readOf(t, p, len(every)); !bytes.Equal(got, every) {
		t.Errorf("the gauge sent bytes 0 to 255, read were %d: %x", len(got), got)
	}
	if _, err := p.Write(every); err != nil {
		t.Fatal(err)
	}
	heard := make([]byte, 0, 512)
	for buf := make([]byte, 512); len(heard) < len(every); {
		n, err := gauge.Read(buf)
		if err != nil {
			t.Fatal(err)
		}
		heard = append(heard, buf[:n]...)
	}
	// An echo of what the gauge sent would stand here too.
	if !bytes.Equal(heard, every) {
		t.Errorf("bytes 0 to 255 were sent, the gauge heard %d: %x", len(heard), heard)
	}
}

// The line settings asked for are those the tty has.
func TestSocatLineSettings(t *testing.T) {
	pair := socat(t, false)
	l := config.Line{Baud: 4800, DataBits: 7, Parity: "even", StopBits: "2"}
	p, err := opener(t).Open(context.Background(), pair.program, l)
	if err != nil {
		t.Fatal(err)
	}
	defer p.Close()
	tty, err := os.OpenFile(pair.gauge, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer tty.Close()
	if !term.IsTerminal(int(tty.Fd())) {
		t.Fatal("the gauge's end is no terminal")
	}
	own, err := os.OpenFile("/proc/self/fd/"+openDescriptor(t, pair.program), os.O_RDWR, 0)
	if err != nil {
		t.Skip("the settings are read back through /proc: ", err)
	}
	defer own.Close()
	checkTermios(t, own)
}

// openDescriptor finds the number of the descriptor on the tty behind a link.
func openDescriptor(t *testing.T, link string) string {
	t.Helper()
	tty, err := filepath.EvalSymlinks(link)
	if err != nil {
		t.Fatal(err)
	}
	entries, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skip("needs /proc: ", err)
	}
	for _, e := range entries {
		if to, err := os.Readlink("/proc/self/fd/" + e.Name()); err == nil && to == tty {
			return e.Name()
		}
	}
	t.Fatal("the port has no descriptor on " + tty)
	return ""
}

// The other program's death hangs the line up: an error, at once, every time.
func TestSocatHangup(t *testing.T) {
	defer goleak.VerifyNone(t)
	pair := socat(t, false)
	p := openPort(t, opener(t), pair.program)
	gauge := pair.speak(t)
	gauge.WriteString("+001.000\r\n")
	if got := readOf(t, p, 10); string(got) != "+001.000\r\n" {
		t.Fatalf("read %q", got)
	}
	gauge.Close()
	pair.end()
	for range 3 {
		if _, err := p.Read(make([]byte, 8)); !errors.Is(err, device.ErrUnplugged) {
			t.Errorf("read of a line that was hung up: %v", err)
		}
	}
	if _, err := p.Write([]byte("?")); !errors.Is(err, device.ErrUnplugged) {
		t.Errorf("write: %v", err)
	}
	p.Close()
}

// Half open: the gauge's end is let go while the line stays. That is silence,
// no loss, and when somebody speaks again it is heard.
func TestSocatHalfOpen(t *testing.T) {
	pair := socat(t, false)
	r := rig(1, signed)
	r.Gauges[0].Port = pair.program
	var l log
	b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: opener(t), Sink: &l})
	for i, text := range []string{"+001.000\r\n", "+002.000\r\n", "+003.000\r\n"} {
		gauge := pair.speak(t)
		if _, err := gauge.WriteString(text); err != nil {
			t.Fatal(err)
		}
		wait(t, b, pair.program, int64(10*(i+1)))
		gauge.Close()
		time.Sleep(50 * time.Millisecond)
	}
	if len(l.all()) != 3 || len(l.of(device.Indication)) != 3 {
		t.Errorf("%+v", l.all())
	}
}
