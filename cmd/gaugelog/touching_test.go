package main

import (
	"context"
	"fmt"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"github.com/spf13/cobra"

	"gaugelog/config"
	"gaugelog/device/devicetest"
)

const touchedRig = `# comments stay
specimen: {name: a, section: {shape: rectangle, width: 140 mm, depth: 38 mm}, length: 800 mm}
supports: [{name: left, at: 0 mm}, {name: right, at: 600 mm}]
gauges:
  # the middle
  - name: mid
    sense: up   # to be found
    at: 300 mm

    resolution: 0.001 mm
    frame: signed-decimal
    port: p1    # left hub
  - {name: edge, at: 150 mm, sense: down, resolution: 0.001 mm, port: p0, frame: signed-decimal} # lamp
  - {name: far, at: 450 mm, sense: down, resolution: 0.001 mm, port: p2, frame: signed-decimal}
loads: [{name: pan, at: 300 mm}]
`

// press is a plunger held away from its rest for a second.
type press struct {
	at    time.Duration
	wire  int
	moved float64
}

// Two gauges that move at once are not counted, one that was found is not found
// again, the last can be taken back, and one that never moves is shown with
// what its port reads; the file changes in the scalars alone.
func TestTouching(t *testing.T) {
	rig, err := config.Parse("rig.yaml", []byte(touchedRig))
	if err != nil {
		t.Fatal(err)
	}
	var found []touched
	var out, errs strings.Builder
	synctest.Test(t, func(t *testing.T) {
		opener := &devicetest.Opener{}
		ctx, stop := context.WithCancel(t.Context())
		sent := make(chan bool)
		go stream(ctx, sent, opener, []press{
			{6 * time.Second, 0, 0.5},                                       // mid
			{11 * time.Second, 1, -0.6}, {11200 * time.Millisecond, 0, 0.4}, // both
			{16 * time.Second, 0, 0.5},  // mid once more, instead of edge
			{26 * time.Second, 1, 0.45}, // mid anew, behind the "u"
			{31 * time.Second, 0, -0.7}, // edge
		})
		lines := make(chan string, 1)
		typist := make(chan bool)
		go func() {
			defer close(typist)
			time.Sleep(21 * time.Second)
			lines <- "u"
			time.Sleep(40 * time.Second)
			lines <- "s"
		}()
		cmd := &cobra.Command{}
		cmd.SetOut(&out)
		cmd.SetErr(&errs)
		found, err = touchAll(ctx, cmd, sourcesOf(rig), rig.Gauges, opener, lines, 0.05)
		<-typist
		stop()
		<-sent
	})
	if err != nil || len(found) != 2 {
		t.Fatalf("%v, %d found\n%s%s", err, len(found), out.String(), errs.String())
	}
	for _, want := range []string{"p1 moved by -0.600 mm, and p0 moved too", "p0 moved by +0.500 mm, but that is gauge mid already",
		"took back gauge mid", "p2 reads 3.000 mm", "skipped far"} {
		if !strings.Contains(errs.String(), want) {
			t.Errorf("%q was not said:\n%s", want, errs.String())
		}
	}
	file := &splicing{path: "rig.yaml", old: []byte(touchedRig), text: []byte(touchedRig)}
	for _, f := range found {
		if err := putTouched(file, f); err != nil {
			t.Fatal(err)
		}
	}
	want := strings.NewReplacer("sense: up   #", "sense: down   #",
		"sense: down, resolution: 0.001 mm, port: p0", "sense: up, resolution: 0.001 mm, port: p0").Replace(touchedRig)
	if string(file.text) != want {
		t.Errorf("the rig file became\n%s\nwant\n%s", file.text, want)
	}
	if w := shared(rig, []touched{{gauge: rig.Gauges[0], source: rig.Gauges[1]}}); len(w) != 1 || !strings.Contains(w[0], "gauge edge on p0, where gauge mid was found") {
		t.Errorf("warnings %q", w)
	}
}

// stream lets three gauges send ten times a second, moved by the presses.
func stream(ctx context.Context, done chan bool, opener *devicetest.Opener, presses []press) {
	defer close(done)
	var wires []*devicetest.Wire
	for i := range 3 {
		wires = append(wires, opener.Plug(fmt.Sprintf("p%d", i)))
	}
	for began := time.Now(); ctx.Err() == nil; time.Sleep(100 * time.Millisecond) {
		for i, w := range wires {
			v := float64(i + 1)
			for _, p := range presses {
				if s := time.Since(began); p.wire == i && s >= p.at && s < p.at+time.Second {
					v += p.moved
				}
			}
			w.Send(fmt.Appendf(nil, "%+08.3f\r\n", v))
		}
	}
}
