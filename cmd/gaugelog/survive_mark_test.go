//go:build campaign && linux

package main

import (
	"errors"
	"fmt"
	"io"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"
)

// TestSurviveMarkOfAnotherUser enters marks from the shell of another user, who
// shares a group with the run folder, while a recording of root's goes on: each
// is on disk when the command answers, and the page has it within two seconds:
// the recorder looks for marks five times a second, the page is drawn anew
// every second.
func TestSurviveMarkOfAnotherUser(t *testing.T) {
	needRoot(t)
	const nobody = 65534
	program, dir := buildProgram(t), t.TempDir()
	f := newFeeder(t, 2, 10)
	rig, ports := f.write(t, dir, "{sampling: all}")
	run := filepath.Join(dir, "run")
	if err := os.Mkdir(run, 0o775); err != nil {
		t.Fatal(err)
	}
	open := []error{os.Chown(run, 0, nobody), os.Chmod(run, 0o2775)}
	for _, d := range []string{dir, filepath.Dir(dir), filepath.Dir(program)} { // others must get there
		open = append(open, os.Chmod(d, 0o755))
	}
	if err := errors.Join(open...); err != nil {
		t.Fatal(err)
	}
	token := filepath.Join(dir, "token")
	if err := os.WriteFile(token, []byte("a token of the test's\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	p := start(t, program, "record", rig, "--into", run, "--ports", ports, "--quiet", "--page", "127.0.0.1:0", "--page-token", token)
	p.says(t, "recording "+run, 30*time.Second)
	page := regexp.MustCompile(`page (http://\S+)`).FindStringSubmatch(p.err.String() + p.out.String())
	if page == nil {
		t.Fatalf("no page was told: %s", &p.err)
	}
	var waits []time.Duration
	for i := range 5 {
		note := fmt.Sprintf("looked at the rig %d", i)
		c := exec.Command(program, "mark", run, "--note", note)
		c.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: nobody, Gid: nobody}}
		if out, err := c.CombinedOutput(); err != nil {
			t.Fatalf("another user's mark: %v: %s", err, out)
		}
		entered := time.Now()
		if text, err := os.ReadFile(filepath.Join(run, "marks.lp")); err != nil || !strings.Contains(string(text), note) {
			t.Fatalf("the command answered before the mark was in the file: %v", err)
		}
		waitFor(t, 20*time.Second, "the mark on the page", func() bool { return strings.Contains(pageOf(t, page[1]), note) })
		waits = append(waits, time.Since(entered))
	}
	slices.Sort(waits)
	t.Logf("on the page after %v", waits)
	if middle := waits[len(waits)/2]; middle > 2*time.Second {
		t.Errorf("the page had the mark after %v, want a second and what the page's drawing takes", middle)
	}
	if err := p.end(t, syscall.SIGTERM); err != nil {
		t.Fatalf("%v: %s", err, &p.err)
	}
}

func pageOf(t *testing.T, address string) string {
	t.Helper()
	resp, err := http.Get(address)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	b, err := io.ReadAll(resp.Body)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}
