package device_test

import (
	"os"
	"testing"

	"golang.org/x/sys/unix"
)

// checkTermios reads the settings of TestLineSettings back from the kernel.
// A pseudo-terminal keeps speed, parity and stop bits; it forces eight bits.
func checkTermios(t *testing.T, master *os.File) {
	t.Helper()
	got, err := unix.IoctlGetTermios(int(master.Fd()), unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	if got.Cflag&unix.CBAUD != unix.B4800 || got.Cflag&unix.CSTOPB == 0 {
		t.Errorf("control flags %#o: not 4800 baud with two stop bits", got.Cflag)
	}
	if got.Lflag&(unix.ECHO|unix.ICANON|unix.ISIG) != 0 || got.Iflag&(unix.ICRNL|unix.IXON) != 0 {
		t.Errorf("not raw: local %#o, input %#o", got.Lflag, got.Iflag)
	}
}
