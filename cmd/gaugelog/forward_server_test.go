//go:build campaign && linux

package main

import (
	"encoding/json"
	"fmt"
	"net"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"sync"
	"testing"
)

// influx is a real InfluxDB 1.x on loopback, that can be killed and started
// anew on the same data.
type influx struct {
	address, config string
	cmd             *exec.Cmd
}

func newInflux(t *testing.T) *influx {
	t.Helper()
	dir := t.TempDir()
	s := &influx{address: freePort(t), config: filepath.Join(dir, "influxdb.conf")}
	text := fmt.Sprintf("reporting-disabled = true\nbind-address = %q\n[meta]\ndir = %q\n[data]\ndir = %q\nwal-dir = %q\n[http]\nbind-address = %q\nlog-enabled = false\n",
		freePort(t), dir+"/meta", dir+"/data", dir+"/wal", s.address)
	if err := os.WriteFile(s.config, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	s.start(t)
	t.Cleanup(s.kill)
	return s
}

func (s *influx) start(t *testing.T) {
	s.cmd = exec.Command("influxd", "-config", s.config)
	if err := s.cmd.Start(); err != nil {
		t.Error(err)
		return
	}
	waitForServer(t, "http://"+s.address+"/ping")
}

// kill ends it by SIGKILL.
func (s *influx) kill() {
	_ = s.cmd.Process.Kill()
	_ = s.cmd.Wait()
}

func (s *influx) create(t *testing.T, database string) {
	t.Helper()
	post(t, "http://"+s.address+"/query?q="+url.QueryEscape("CREATE DATABASE "+database), nil)
}

// count is the server's own count of a run's readings.
func (s *influx) count(t *testing.T, database, run string) int {
	t.Helper()
	q := url.Values{"db": {database}, "q": {`SELECT count("mm") FROM "indication" WHERE "run" = '` + run + `'`}}
	var a struct {
		Results []struct{ Series []struct{ Values [][2]any } }
	}
	b := get(t, "http://"+s.address+"/query?"+q.Encode())
	if err := json.Unmarshal(b, &a); err != nil || len(a.Results) != 1 {
		t.Fatalf("%s: %v", b, err)
	}
	if len(a.Results[0].Series) == 0 {
		return 0
	}
	return int(a.Results[0].Series[0].Values[0][1].(float64))
}

// newVictoria starts a real VictoriaMetrics on loopback, until the test ends.
func newVictoria(t *testing.T) (address string) {
	t.Helper()
	address = freePort(t)
	c := exec.Command("victoria-metrics", "-storageDataPath="+t.TempDir(), "-httpListenAddr="+address, "-retentionPeriod=100y")
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = c.Process.Kill()
		_ = c.Wait()
	})
	waitForServer(t, "http://"+address+"/health")
	return address
}

// cutter is a network between a client and a server, in which something happens
// when a number of bytes has passed.
type cutter struct {
	address string
	mu      sync.Mutex
	armed   bool
	answers bool // the bytes are those of answers
	left    int
	act     func()
	fired   chan struct{}
}

// newCutter listens before the server; it ends with the test.
func newCutter(t *testing.T, server string) *cutter {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	c := &cutter{address: l.Addr().String()}
	var open sync.WaitGroup
	t.Cleanup(func() { l.Close(); open.Wait() })
	open.Go(func() {
		for {
			client, err := l.Accept()
			if err != nil {
				return
			}
			far, err := net.Dial("tcp", server)
			if err != nil {
				client.Close()
				continue
			}
			open.Go(func() { c.pass(far, client, false) })
			open.Go(func() { c.pass(client, far, true) })
		}
	})
	return c
}

// arm has act called in the middle of the bytes, after which the connection is
// closed; the channel is closed when that is done.
func (c *cutter) arm(answers bool, after int, act func()) chan struct{} {
	c.mu.Lock()
	defer c.mu.Unlock()
	if answers {
		after /= 100 // an answer is short
	}
	c.armed, c.answers, c.left, c.act, c.fired = true, answers, after, act, make(chan struct{})
	return c.fired
}

// disarm tells whether it has not happened, and will not.
func (c *cutter) disarm() bool {
	c.mu.Lock()
	defer c.mu.Unlock()
	was := c.armed
	c.armed = false
	return was
}

// pass copies one way until either end closes or it is cut.
func (c *cutter) pass(to, from net.Conn, answers bool) {
	defer to.Close()
	defer from.Close()
	buf := make([]byte, 1024)
	for {
		n, err := from.Read(buf)
		keep, fire := c.counted(n, answers)
		if _, err := to.Write(buf[:keep]); err != nil && !fire {
			return
		}
		if fire {
			defer close(c.fired)
			c.act()
			return
		}
		if err != nil {
			return
		}
	}
}

// counted says how many of n bytes pass, and whether it happens now.
func (c *cutter) counted(n int, answers bool) (keep int, fire bool) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if !c.armed || answers != c.answers {
		return n, false
	}
	if c.left -= n; c.left > 0 || n == 0 {
		return n, false
	}
	c.armed = false
	return max(0, n+c.left), true
}
