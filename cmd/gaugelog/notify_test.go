package main

import (
	"net"
	"path/filepath"
	"testing"
	"time"

	"gaugelog/device"
	"gaugelog/ingest"
)

func TestProgresses(t *testing.T) {
	now := int64(time.Hour)
	at := func(age time.Duration) device.Instant { return device.Instant{Boot: now - int64(age)} }
	for _, c := range []struct {
		name string
		s    *ingest.Status
		want bool
	}{
		{"no look yet", nil, false},
		{"fresh", &ingest.Status{At: at(time.Second)}, true},
		{"stuck loop", &ingest.Status{At: at(time.Minute)}, false},
		{"closed", &ingest.Status{At: at(time.Minute), Closed: true}, true},
		{"slow card", &ingest.Status{At: at(time.Second), Waiting: 10, SyncAge: 30 * time.Second}, true},
		{"stuck disk", &ingest.Status{At: at(time.Second), Waiting: 10, SyncAge: 6 * time.Minute}, false},
		{"disk that says why", &ingest.Status{At: at(time.Second), Waiting: 10, SyncAge: 6 * time.Minute, Fault: "full"}, true},
		{"idle", &ingest.Status{At: at(time.Second), SyncAge: 6 * time.Minute}, true},
	} {
		if got := progresses(c.s, now); got != c.want {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
}

// TestTellSystem reads what a service manager would hear.
func TestTellSystem(t *testing.T) {
	path := filepath.Join(t.TempDir(), "notify")
	l, err := net.ListenUnixgram("unixgram", &net.UnixAddr{Name: path, Net: "unixgram"})
	if err != nil {
		t.Skip("no datagram sockets here:", err)
	}
	defer l.Close()
	t.Setenv("NOTIFY_SOCKET", path)
	t.Setenv("WATCHDOG_USEC", "60000")
	stop := tellSystem(nil)
	hear := func() string {
		b := make([]byte, 100)
		_ = l.SetReadDeadline(time.Now().Add(5 * time.Second))
		n, err := l.Read(b)
		if err != nil {
			t.Fatal(err)
		}
		return string(b[:n])
	}
	if got := hear(); got != "READY=1" {
		t.Errorf("first %q", got)
	}
	if got := hear(); got != "WATCHDOG=1" {
		t.Errorf("then %q", got)
	}
	stop()
	for got := hear(); got != "STOPPING=1"; got = hear() {
		if got != "WATCHDOG=1" {
			t.Fatalf("at the end %q", got)
		}
	}
}
