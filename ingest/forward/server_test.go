package forward

import (
	"bytes"
	"compress/gzip"
	"context"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"

	"gaugelog/ingest/segment"
)

// server is a line-protocol server that answers by a script and otherwise
// keeps every point by series and stamp, as real ones do.
type server struct {
	*httptest.Server
	mu     sync.Mutex
	script func(n int, r *http.Request, body []byte) (code int, header map[string]string, words string)
	// answer takes a post over where it is not nil and gives true.
	answer func(w http.ResponseWriter, n int, body []byte) bool
	hung   []net.Conn // are closed at the end
	posts  int
	points map[string]string // series and stamp: fields
	twice  int
	bodies [][]byte
	heads  []http.Header
	uris   []string
}

func newServer(t testing.TB) *server {
	s := &server{points: map[string]string{}}
	s.Server = httptest.NewServer(s)
	t.Cleanup(func() {
		for _, c := range s.hung {
			c.Close()
		}
		s.Close()
	})
	return s
}

func (s *server) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	s.mu.Lock()
	defer s.mu.Unlock()
	var in io.Reader = r.Body
	if r.Header.Get("Content-Encoding") == "gzip" {
		z, err := gzip.NewReader(r.Body)
		if err != nil {
			http.Error(w, err.Error(), http.StatusBadRequest)
			return
		}
		in = z
	}
	body, err := io.ReadAll(in)
	if err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	s.posts++
	s.bodies, s.heads, s.uris = append(s.bodies, body), append(s.heads, r.Header.Clone()), append(s.uris, r.RequestURI)
	if s.answer != nil && s.answer(w, s.posts, body) {
		return
	}
	if s.script != nil {
		code, header, words := s.script(s.posts, r, body)
		for k, v := range header {
			w.Header().Set(k, v)
		}
		if code != 0 {
			w.WriteHeader(code)
			fmt.Fprint(w, words)
			return
		}
	}
	if err := s.keep(body); err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	w.WriteHeader(http.StatusNoContent)
}

func (s *server) keep(body []byte) error {
	d := lineprotocol.NewDecoderWithBytes(body)
	for d.Next() {
		m, err := d.Measurement()
		if err != nil {
			return err
		}
		key, fields := string(m), ""
		for {
			k, v, err := d.NextTag()
			if err != nil {
				return err
			}
			if k == nil {
				break
			}
			key += "," + string(k) + "=" + string(v)
		}
		for {
			k, v, err := d.NextField()
			if err != nil {
				return err
			}
			if k == nil {
				break
			}
			fields += "," + string(k) + "=" + v.String()
		}
		at, err := d.Time(lineprotocol.Nanosecond, time.Time{})
		if err != nil {
			return err
		}
		key += " " + strconv.FormatInt(at.UnixNano(), 10)
		if _, ok := s.points[key]; ok {
			s.twice++
		}
		s.points[key] = fields
	}
	return nil
}

const start = int64(1790000000000000000)

// runOf makes a run of n readings a second apart in blocks of eight, with a mark.
func runOf(t testing.TB, n int) (segment.FS, string) {
	t.Helper()
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { root.Close() })
	fsys := segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})
	h := segment.Header{Run: "run-1", Boot: "b", Rig: "00", Clock: segment.ClockState{Wall: start, Synced: true}}
	log, err := segment.OpenLog(fsys, segment.MarksFile, h)
	if err != nil {
		t.Fatal(err)
	}
	p := &segment.Point{Measurement: "load", Tags: []segment.Tag{{Key: "name", Value: "pan"}},
		Fields: []segment.Field{{Key: "newton", Value: 9.8}, {Key: "shown", Value: "1 kg"}}}
	if err := log.Append(h.Clock, segment.Entry{Point: p, Time: start + 5}); err != nil {
		t.Fatal(err)
	}
	write(t, fsys, 1, h, 0, n, true)
	return fsys, filepath.Join(dir, StateDir)
}

// write writes one segment of readings from..to.
func write(t testing.TB, fsys segment.FS, number int, h segment.Header, from, to int, set bool) {
	t.Helper()
	h.Clock.Synced = set
	w, err := segment.NewWriter(fsys, segment.ReadingsDir, number, segment.WriterOptions{Header: h})
	if err != nil {
		t.Fatal(err)
	}
	clock := func(i int) segment.ClockState {
		return segment.ClockState{Boot: int64(i) * 1e9, Wall: start + int64(i)*1e9, Synced: set}
	}
	for i := from; i < to; i++ {
		if err := w.Indication(&segment.Shown{Gauge: "mid", MM: float64(i%2001-1000) / 1000, Time: start + int64(i)*1e9}); err != nil {
			t.Fatal(err)
		}
		if i%8 == 7 {
			if err := w.Checkpoint(clock(i)); err != nil {
				t.Fatal(err)
			}
		}
	}
	if err := w.Close(clock(to)); err != nil {
		t.Fatal(err)
	}
}

// sent forwards a run once, noting waits instead of waiting.
type sent struct {
	Count
	waits   []time.Duration
	notices []Notice
}

func forwardRun(t testing.TB, ctx context.Context, fsys segment.FS, state, address, token string, change func(*Options)) (sent, error) {
	t.Helper()
	target, err := ParseTarget(address, token, false)
	if err != nil {
		t.Fatal(err)
	}
	var s sent
	o := Options{FS: fsys, State: state, Target: target, Rig: "slat a", Lines: 64,
		Tell: func(n Notice) {
			if n != (Notice{}) {
				s.notices = append(s.notices, n)
			}
		},
		Wait: func(ctx context.Context, d time.Duration) error { s.waits = append(s.waits, d); return ctx.Err() }}
	if change != nil {
		change(&o)
	}
	f, err := Open(o)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	err = f.Run(ctx, false)
	s.Count = f.Count()
	return s, err
}

// wantAll holds the server to have every reading and the mark.
func (s *server) wantAll(t *testing.T, n int, but map[int]bool) {
	t.Helper()
	for i := range n {
		key := fmt.Sprintf("indication,gauge=mid,rig=slat a,run=run-1 %d", start+int64(i)*1e9)
		want := fmt.Sprintf(",mm=%s", strconv.FormatFloat(float64(i%2001-1000)/1000, 'g', -1, 64))
		if got := s.points[key]; (got != want) != but[i] {
			t.Errorf("reading %d: %q, want %q", i, got, want)
		}
	}
	if got := s.points[fmt.Sprintf("load,name=pan,rig=slat a,run=run-1 %d", start+5)]; got != `,newton=9.8,shown="1 kg"` {
		t.Errorf("the load is %q", got)
	}
	if len(s.points) != n+1-len(but) {
		t.Errorf("%d points, want %d", len(s.points), n+1-len(but))
	}
}

func words(file string) string {
	b, _ := os.ReadFile(file)
	return string(bytes.TrimSpace(b))
}

func lineOf(i int) string { return strconv.FormatInt(start+int64(i)*1e9, 10) }

func hasLine(body []byte, i int) bool { return strings.Contains(string(body), " "+lineOf(i)+"\n") }
