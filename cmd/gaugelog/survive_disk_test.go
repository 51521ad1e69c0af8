//go:build campaign && linux

package main

import (
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// TestSurviveAFullDisk records onto a tmpfs that shrinks to 1 MiB, fills, and
// is given room again: what does not fit waits in memory, and nothing is lost.
func TestSurviveAFullDisk(t *testing.T) {
	needRoot(t)
	program := buildProgram(t)
	disk := t.TempDir()
	if err := unix.Mount("tmpfs", disk, "tmpfs", 0, "size=96m"); err != nil {
		cannot(t, "needs to mount a tmpfs: "+err.Error())
	}
	t.Cleanup(func() {
		if err := unix.Unmount(disk, unix.MNT_DETACH); err != nil {
			t.Error(err)
		}
	})
	f := newFeeder(t, 4, 400)
	rig, ports := f.write(t, t.TempDir(), "{sampling: all, sync: 100 ms, roll: {size: 16 MB}}")
	s := &traced{t: t, feeder: f, program: program, rig: rig, ports: ports, run: filepath.Join(disk, "run")}
	s.process = start(t, s.command()...)
	s.process.says(t, "recording", 30*time.Second)
	if err := unix.Mount("tmpfs", disk, "tmpfs", unix.MS_REMOUNT, "size=1m"); err != nil {
		t.Fatal(err)
	}
	// Somebody else's file takes most of it, the readings take the rest.
	if err := os.WriteFile(filepath.Join(disk, "ballast"), make([]byte, 700_000), 0o644); err != nil {
		t.Fatal(err)
	}
	free, since := uint64(0), time.Now()
	waitFor(t, 90*time.Second, "the disk to be full", func() bool {
		var st unix.Statfs_t
		if err := unix.Statfs(disk, &st); err != nil {
			t.Fatal(err)
		}
		if now := st.Bavail * uint64(st.Bsize); now != free {
			free, since = now, time.Now()
		}
		return free < 64<<10 && time.Since(since) > 600*time.Millisecond
	})
	time.Sleep(5 * time.Second)
	if err := unix.Mount("tmpfs", disk, "tmpfs", unix.MS_REMOUNT, "size=96m"); err != nil {
		t.Fatal(err)
	}
	waitFor(t, 60*time.Second, "the recording to go on", func() bool {
		return strings.Contains(eventsText(t, s.run), "kind=disk-back")
	})
	time.Sleep(time.Second)
	if err := s.process.end(t, syscall.SIGTERM); err != nil {
		t.Errorf("%v\n%s", err, s.process.err.String())
	}
	total := s.onceEach(0, 4*400*4)
	if events := eventsText(t, s.run); !strings.Contains(events, "kind=disk-full") {
		t.Errorf("no event says that the disk was full:\n%s", events)
	}
	t.Logf("%d readings through a full disk, each once", total)
}

func waitFor(t *testing.T, within time.Duration, what string, is func() bool) {
	t.Helper()
	for began := time.Now(); !is(); time.Sleep(20 * time.Millisecond) {
		if time.Since(began) > within {
			t.Fatalf("waited %v for %s", within, what)
		}
	}
}

// TestSurviveAFileLimit sets a limit on the length of files that every segment
// meets: the system writes a part and refuses the rest. No line is lost, none is
// there twice.
func TestSurviveAFileLimit(t *testing.T) {
	program := buildProgram(t)
	f := newFeeder(t, 2, 200)
	rig, ports := f.write(t, t.TempDir(), "{sampling: all, sync: 200 ms, roll: {size: 1 MB}}")
	s := &traced{t: t, feeder: f, program: program, rig: rig, ports: ports, run: filepath.Join(t.TempDir(), "run")}
	const limit = 48 << 10
	s.process = start(t, append([]string{"sh", "-c", `ulimit -f 96; exec "$@"`, "sh"}, s.command()...)...)
	s.process.says(t, "recording", 30*time.Second)
	time.Sleep(8 * time.Second)
	if err := s.process.end(t, syscall.SIGTERM); err != nil {
		t.Errorf("%v\n%s", err, s.process.err.String())
	}
	total := s.onceEach(0, 2*200*6)
	segments := len(segmentNumbers(t, s.run))
	if segments < 3 {
		t.Errorf("only %d segments: the limit was not met", segments)
	}
	entries, err := filepath.Glob(filepath.Join(s.run, "readings", "*"))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range entries {
		if info, err := os.Stat(name); err != nil || info.Size() > limit {
			t.Errorf("%s: %v, %v", name, info, err)
		}
	}
	t.Logf("%d readings in %d segments cut off at 48 KiB, each once", total, segments)
}
