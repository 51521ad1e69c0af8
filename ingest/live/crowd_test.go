package live

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"os"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

// A thousand clients that hold streams open leave room for the serial ports,
// whose descriptors must stay below 1,024, and the recording goes on.
func TestManyIdleStreams(t *testing.T) {
	w := serve(t, desktest.New(t, desktest.Options{}), false)
	before, _ := descriptors(t)
	stored := w.Rec.Status().Stored
	address := strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/")
	var conns []net.Conn
	defer func() {
		for _, c := range conns {
			c.Close()
		}
	}()
	open, refused := 0, 0
	for range 1000 {
		c, err := net.Dial("tcp", address)
		if err != nil {
			refused++
			continue
		}
		fmt.Fprintf(c, "GET %sstream HTTP/1.1\r\nHost: localhost\r\n\r\n", home)
		_ = c.SetReadDeadline(time.Now().Add(200 * time.Millisecond))
		line, err := bufio.NewReader(c).ReadString('\n')
		if err != nil {
			c.Close() // the client's own descriptor; the server closed its end
			refused++
			continue
		}
		conns = append(conns, c)
		if strings.Contains(line, " 200 ") {
			open++
		}
	}
	if open != mostStreams {
		t.Errorf("%d streams are open, want %d", open, mostStreams)
	}
	if len(conns) > mostConnections {
		t.Errorf("%d connections are open, want %d at most", len(conns), mostConnections)
	}
	// Both ends are in this process: two descriptors a connection.
	now, highest := descriptors(t)
	if now-before > 2*mostConnections+16 {
		t.Errorf("%d descriptors more than before", now-before)
	}
	if highest >= 1024 {
		t.Errorf("the highest descriptor is %d: a serial port's Read panics from 1,024 on", highest)
	}
	for deadline := time.Now().Add(5 * time.Second); w.Rec.Status().Stored <= stored; time.Sleep(50 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("the recording stands at %d readings", stored)
		}
	}
	t.Logf("%d streams open, %d connections, %d refused, highest descriptor %d", open, len(conns), refused, highest)
}

// descriptors counts those of this process, and gives the highest.
func descriptors(t *testing.T) (count, highest int) {
	t.Helper()
	d, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skip("descriptors cannot be counted here")
	}
	for _, e := range d {
		if n, err := strconv.Atoi(e.Name()); err == nil {
			highest = max(highest, n)
		}
	}
	return len(d), highest
}

// A stream ends with the server, and its reader with the client.
func TestStreamsEnd(t *testing.T) {
	t.Parallel()
	world := desktest.New(t, desktest.Options{})
	s, err := Listen(Options{Desks: []*desk.Desk{world.Desk}, Address: "127.0.0.1:0", Token: testToken})
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()
	r, err := http.NewRequest("GET", strings.TrimSuffix(s.URL(), "/")+home+"stream", nil)
	if err != nil {
		t.Fatal(err)
	}
	transport := &http.Transport{}
	defer transport.CloseIdleConnections()
	answer, err := (&http.Client{Transport: transport}).Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	lines := bufio.NewReader(answer.Body)
	if line, err := lines.ReadString('\n'); err != nil || line != "event: sections\n" {
		t.Fatalf("the stream begins with %q, %v", line, err)
	}
	stop()
	if err := <-ended; err != nil {
		t.Errorf("the server ended with %v", err)
	}
	if _, err := io.Copy(io.Discard, lines); err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Logf("the stream ended with %v", err)
	}
}

// While many look, load the page again and again, and hold streams open that
// they never read, no reading is lost and none waits: handing one over only ever
// puts it into a queue. The longest hand-over is told, with -v.
func TestReadingsNeverWaitForThePage(t *testing.T) {
	w := serve(t, desktest.New(t, desktest.Options{Still: true}), false)
	ctx, stop := context.WithCancel(t.Context())
	var crowd sync.WaitGroup
	for range mostStreams {
		c, err := net.Dial("tcp", strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/"))
		if err != nil {
			t.Fatal(err)
		}
		defer c.Close()
		fmt.Fprintf(c, "GET %sfollow HTTP/1.1\r\nHost: localhost\r\n\r\n", home)
	}
	var pages atomic.Int64
	for range 4 {
		crowd.Go(func() {
			for ctx.Err() == nil {
				r, err := http.NewRequestWithContext(ctx, "GET", strings.TrimSuffix(w.URL(), "/")+home, nil)
				if err != nil {
					t.Error(err)
					return
				}
				a, err := http.DefaultClient.Do(r)
				if err != nil {
					continue // the test is over, or there were too many at once
				}
				_, _ = io.Copy(io.Discard, a.Body)
				a.Body.Close()
				pages.Add(1)
			}
		})
	}
	const times = 300
	longest := time.Duration(0)
	for range times {
		began := time.Now()
		w.Feed()
		longest = max(longest, time.Since(began))
		time.Sleep(5 * time.Millisecond)
	}
	stop()
	crowd.Wait()
	http.DefaultClient.CloseIdleConnections()
	want := int64(4 * times) // three gauges and a probe
	for deadline := time.Now().Add(10 * time.Second); w.Rec.Status().Stored < want; time.Sleep(50 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("%d of %d readings were stored", w.Rec.Status().Stored, want)
		}
	}
	if s := w.Rec.Status(); s.Stored != want || s.Dropped != 0 || w.Desk.Snapshot().Missed != 0 {
		t.Errorf("%d stored, %d dropped, %d missing on the page", s.Stored, s.Dropped, w.Desk.Snapshot().Missed)
	}
	if pages.Load() == 0 {
		t.Error("no page was loaded meanwhile")
	}
	t.Logf("%d pages loaded; four readings were handed over within %s at the longest", pages.Load(), longest)
}
