package device

import (
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
)

// TestLockLeftByAnother: a lock that one user left in a folder like /run/lock
// does not keep the next one off the port. It runs itself as another user.
func TestLockLeftByAnother(t *testing.T) {
	if dir := os.Getenv("GAUGELOG_LOCK_IN"); dir != "" {
		lock, err := lockPort(dir, "/dev/ttyTEST")
		if err != nil {
			t.Fatal(err)
		}
		if _, err := lockPort(dir, "/dev/ttyTEST"); err == nil {
			t.Error("it is taken twice")
		}
		lock.release()
		return
	}
	if os.Geteuid() != 0 {
		t.Skip("needs root to become another user")
	}
	under, err := os.MkdirTemp("/tmp", "gaugelog-lock-")
	if err != nil {
		t.Fatal(err)
	}
	defer os.RemoveAll(under)
	dir := filepath.Join(under, "lock")
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	for path, mode := range map[string]os.FileMode{under: 0o755, dir: 0o777 | os.ModeSticky} {
		if err := os.Chmod(path, mode); err != nil {
			t.Fatal(err)
		}
	}
	lock, err := lockPort(dir, "/dev/ttyTEST")
	if err != nil {
		t.Fatal(err)
	}
	lock.release()
	program := filepath.Join(under, "test")
	text, err := os.ReadFile("/proc/self/exe")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(program, text, 0o755); err != nil {
		t.Fatal(err)
	}
	for _, mode := range []os.FileMode{0o666, 0o644} { // as it is made, and as an older version made it
		if err := os.Chmod(filepath.Join(dir, "gaugelog-port-ttyTEST.lock"), mode); err != nil {
			t.Fatal(err)
		}
		c := exec.Command(program, "-test.run", "^TestLockLeftByAnother$", "-test.v")
		c.Dir, c.Env = under, append(os.Environ(), "GAUGELOG_LOCK_IN="+dir, "GOCOVERDIR=")
		c.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: 65534, Gid: 65534}}
		out, err := c.CombinedOutput()
		if errors.Is(err, syscall.ENOEXEC) {
			t.Skip("this program runs under an emulator that starts no other: ", err)
		}
		if err != nil || !strings.Contains(string(out), "PASS: TestLockLeftByAnother") {
			t.Errorf("mode %o: %v\n%s", mode, err, out)
		}
	}
}
