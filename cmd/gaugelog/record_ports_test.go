//go:build unix

package main

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/creack/pty"
	"golang.org/x/term"

	"gaugelog/config"
	"gaugelog/device"
)

// The list of ports is read anew at each opening: a port that came back under
// another name is found there.
func TestListedPortsAreLookedUpAnew(t *testing.T) {
	list := filepath.Join(t.TempDir(), "ports.txt")
	write := func(text string) {
		t.Helper()
		if err := os.WriteFile(list, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	terminal := func() (*os.File, string) {
		t.Helper()
		master, slave, err := pty.Open()
		if err != nil {
			t.Skip("no pseudo-terminals here: ", err)
		}
		t.Cleanup(func() { master.Close(); slave.Close() })
		if _, err := term.MakeRaw(int(slave.Fd())); err != nil {
			t.Fatal(err)
		}
		return master, slave.Name()
	}
	line := config.Line{Baud: 9600, DataBits: 8, Parity: "none", StopBits: "1"}
	hears := func(o device.Opener, master *os.File, text string) {
		t.Helper()
		p, err := o.Open(t.Context(), "sim:mid", line)
		if err != nil {
			t.Fatal(err)
		}
		defer p.Close()
		master.WriteString(text)
		buf := make([]byte, 64)
		for got := ""; got != text; {
			n, err := p.Read(buf)
			if err != nil && !errors.Is(err, device.ErrQuiet) {
				t.Fatal(err)
			}
			got += string(buf[:n])
		}
	}
	first, path := terminal()
	write("sim:mid " + path + "\n")
	o, err := openerOf(list)
	if err != nil {
		t.Fatal(err)
	}
	hears(o, first, "+001.000\r\n")
	second, again := terminal()
	write("sim:mid " + path + "\nsim:mid " + again + "\n")
	hears(o, second, "+002.000\r\n")

	if err := os.Remove(list); err != nil {
		t.Fatal(err)
	}
	if _, err := o.Open(t.Context(), "sim:mid", line); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("a list that is gone: %v", err)
	}
	write("sim:mid\n")
	if _, err := openerOf(list); err == nil || !strings.Contains(err.Error(), "is not two words") {
		t.Errorf("a list that is none: %v", err)
	}
}
