//go:build unix

package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/creack/pty"
	"golang.org/x/term"

	"gaugelog/analysis/calibrate"
)

// blockGauge is a gauge on a pseudo-terminal that streams what lies under it.
type blockGauge struct {
	path      string
	thousands atomic.Int64 // what it shows, 0.001 mm
}

func newBlockGauge(t *testing.T) *blockGauge {
	t.Helper()
	master, slave, err := pty.Open()
	if err != nil {
		t.Skip("no pseudo-terminals here: ", err)
	}
	if _, err := term.MakeRaw(int(slave.Fd())); err != nil {
		t.Fatal(err)
	}
	g := &blockGauge{path: slave.Name()}
	stop, done := make(chan struct{}), make(chan struct{})
	go func() {
		defer close(done)
		tick := time.NewTicker(10 * time.Millisecond)
		defer tick.Stop()
		for {
			select {
			case <-stop:
				return
			case <-tick.C:
				if _, err := fmt.Fprintf(master, "%+08.3f\r\n", float64(g.thousands.Load())/1000); err != nil {
					return
				}
			}
		}
	}()
	t.Cleanup(func() {
		close(stop)
		slave.Close()
		master.Close()
		<-done
	})
	return g
}

// answers hands over what the command says, line by line.
type answers struct {
	lines chan string
	part  string
	all   strings.Builder
}

func (a *answers) Write(b []byte) (int, error) {
	a.all.Write(b)
	a.part += string(b)
	for {
		line, rest, whole := strings.Cut(a.part, "\n")
		if !whole {
			return len(b), nil
		}
		a.part = rest
		a.lines <- line
	}
}

// A session with the gauge itself: blocks laid under it up and down, one typed
// wrongly and taken back. The line is the gauge's, the raw session is kept and
// says the same again, the rig file has the line and the rest of its bytes.
func TestCalibrateLive(t *testing.T) {
	g, dir := newBlockGauge(t), t.TempDir()
	rigFile, ports := filepath.Join(dir, "rig.yaml"), filepath.Join(dir, "ports.txt")
	rig := `specimen: {name: a3, section: {shape: rectangle, width: 140 mm, depth: 38 mm}, length: 800 mm}
supports: [{name: left, at: 0 mm}, {name: right, at: 600 mm}]
frames: [{name: streamed, kind: text, end: "\r\n", pattern: '(?P<value>[+-]\d{3}\.\d{3})', unit: mm}]
gauges:
  - {name: mid, at: 300 mm, sense: down, resolution: 0.001 mm, travel: [0 mm, 12.7 mm], port: sim:mid, frame: streamed}   # lamp
loads: [{name: pan, at: 300 mm}]
`
	for name, text := range map[string]string{rigFile: rig, ports: "sim:mid " + g.path + "\n"} {
		if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	typedIn, typing := io.Pipe()
	said := &answers{lines: make(chan string, 1000)}
	var out strings.Builder
	ended := make(chan Code, 1)
	go func() {
		ended <- run([]string{"calibrate", rigFile, "--gauge", "mid", "--ports", ports, "--settle", "40 ms", "--average", "60 ms",
			"--date", "2026-09-14", "--write", "--yes", "--json"}, typedIn, &out, said)
	}()
	wait := func(want string) {
		t.Helper()
		for {
			select {
			case line := <-said.lines:
				if regexp.MustCompile(want).MatchString(line) {
					return
				}
			case code := <-ended:
				t.Fatalf("it ended with %d: %s", code, said.all.String())
			case <-time.After(20 * time.Second):
				t.Fatalf("no %q came", want)
			}
		}
	}
	wait("type each block's length")
	n := 0
	lay := func(block, shows float64, way string) {
		t.Helper()
		g.thousands.Store(int64(math.Round(shows * 1000)))
		fmt.Fprintf(typing, "%g\n", block)
		n++
		wait(fmt.Sprintf(`^%d: block %g mm, %s: .* mm \(mean of [1-9]`, n, block, way))
	}
	truly := func(block, back float64) float64 { return 0.011 + 1.0004*block + back }
	for _, b := range []float64{0, 2.5, 5, 7.5, 10} {
		lay(b, truly(b, 0), "up")
	}
	lay(1, 3, "down") // no such block
	fmt.Fprintln(typing, "u")
	wait("took back the block of 1 mm")
	n--
	for _, b := range []float64{10, 7.5, 5, 2.5, 0} {
		way := "down"
		if b == 10 {
			way = "up" // the same block goes the way of the one before
		}
		lay(b, truly(b, 0.002), way)
	}
	fmt.Fprintln(typing, "done")
	if code := <-ended; code != Done {
		t.Fatalf("it ended with %d: %s", code, said.all.String())
	}
	var c calibrated
	if err := json.Unmarshal([]byte(out.String()), &c); err != nil {
		t.Fatal(err)
	}
	checkLiveLine(t, c)
	kept := filepath.Join(dir, "calibration-mid-2026-09-14.csv")
	code, again, errOut := gaugelog("calibrate", rigFile, "--gauge", "mid", "--csv", kept, "--json")
	var same calibrated
	if err := json.Unmarshal([]byte(again), &same); err != nil || code != Done {
		t.Fatalf("%v, exit %d: %s", err, code, errOut)
	}
	if len(same.Points) != 10 || same.Points[0].Time == "" || same.Line.Gain != c.Line.Gain || same.Line.UOffset != c.Line.UOffset {
		t.Errorf("the kept session says %+v, the live one %+v", same.Line, c.Line)
	}
	text, err := os.ReadFile(rigFile)
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(text), "date: 2026-09-14") || !strings.Contains(string(text), "due: 2027-09-14") || !strings.Contains(string(text), "# lamp") {
		t.Errorf("the rig file is now\n%s", text)
	}
	if code, _, errOut := gaugelog("check", rigFile); code != Done {
		t.Errorf("check ended with %d: %s", code, errOut)
	}
}

// checkLiveLine holds the line against the gauge that was laid on the blocks:
// gain 1.0004, 0.002 mm more on the way down.
func checkLiveLine(t *testing.T, c calibrated) {
	t.Helper()
	l := c.Line
	if math.Abs(l.Gain-1.0004) > 2*l.UGain || math.Abs(l.Offset-0.012) > 2*l.UOffset || l.DOF != 8 {
		t.Errorf("offset %g (u %g), gain %g (u %g), %d degrees of freedom", l.Offset, l.UOffset, l.Gain, l.UGain, l.DOF)
	}
	// The longest block counts as taken twice on the way up: its repeat is the
	// hysteresis, and the four others were taken both ways.
	if h := l.Hysteresis; h == nil || math.Abs(h.MM-0.002) > 0.0011 || h.Blocks != 4 {
		t.Errorf("hysteresis %+v", h)
	}
	if r := l.Repeatability; r == nil || r.DOF != 1 || math.Abs(r.SD-0.002/math.Sqrt2) > 1e-3 {
		t.Errorf("repeatability %+v", r)
	}
	if !l.Curvature.LineEnough {
		t.Errorf("a line is not enough: %+v", l.Curvature)
	}
	// A difference has the two readings' scatter and the gain's error in it, not
	// the offset's.
	diff := l.Difference(0.011, 10.011)
	if want := math.Sqrt(2*l.ReadingU*l.ReadingU+100*l.UGain*l.UGain) / l.Gain; math.Abs(diff.U-want) > 1e-3*want {
		t.Errorf("u of a difference %g, want %g", diff.U, want)
	}
	for _, p := range c.Points {
		if p.Direction != calibrate.Up && p.Direction != calibrate.Down {
			t.Errorf("direction %q", p.Direction)
		}
	}
}
