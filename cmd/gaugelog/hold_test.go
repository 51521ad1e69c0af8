package main

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"github.com/rogpeppe/go-internal/testscript"
)

// madeHold is a foreign run folder: one load on a board of 8 um/N, held.
type madeHold struct {
	newton float64
	before float64 // s at rest before the load
	every  float64 // s, between readings after the first hours
	dense  float64 // s, between readings in the first hour after a change
	first  float64 // s, the first reading after loading
	hold   float64 // s under load
	rest   float64 // s after the unloading; 0: none
	n      float64 // exponent of the creep
	part   float64 // creep after 1 h, share of the elastic sag
	set    float64 // mm, what the sag does at the unloading beside the law
	grid   float64 // mm, the gauge's resolution
	noise  float64 // mm
	room   bool    // a probe reads temperature and humidity
}

// sag is the law's, mm, s seconds after full load, for so many newtons.
func (m madeHold) sag(newton, s float64) float64 {
	if s < 0 {
		return 0
	}
	return 0.008 * newton * (1 + m.part*math.Pow(s/3600, m.n))
}

// hold is a command of the scripts: it writes a run folder made elsewhere,
// with what is asked of it:
//
//	hold RUN [before=TIME] [hold=TIME] [every=TIME] [dense=TIME] [first=TIME] [rest=TIME] [n=N] [part=P]
//	    [set=MM] [grid=MM] [noise=MM] [room=yes]
func hold(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) == 0 {
		ts.Fatalf("usage: hold RUN [KEY=VALUE]...")
	}
	m := madeHold{newton: 400, every: 300, dense: 5, first: 1, before: 600, hold: 7 * 86400, n: 0.23, part: 0.085, grid: 0.001, noise: 0.0005}
	into := map[string]*float64{"newton": &m.newton, "every": &m.every, "dense": &m.dense, "first": &m.first, "before": &m.before, "hold": &m.hold, "rest": &m.rest,
		"n": &m.n, "part": &m.part, "set": &m.set, "grid": &m.grid, "noise": &m.noise}
	for _, a := range args[1:] {
		k, v, _ := strings.Cut(a, "=")
		if k == "room" {
			m.room = v == "yes"
			continue
		}
		p, known := into[k]
		if !known {
			ts.Fatalf("no key %q", k)
		}
		if d, err := time.ParseDuration(v); err == nil && v != "0" {
			*p = d.Seconds()
			continue
		}
		x, err := strconv.ParseFloat(v, 64)
		ts.Check(err)
		*p = x
	}
	ts.Check(m.write(ts.MkAbs(args[0]), ts.ReadFile("rig.yaml")))
}

// write writes the folder: rest, the hold, the rest.
func (m madeHold) write(dir, rig string) error {
	const start = 1790000000
	loaded := m.before
	bare := math.Inf(1)
	end := loaded + m.hold
	marks := fmt.Sprintf("load,name=pan newton=%g,step=\"s1\" %d\n", m.newton, int64(start+loaded)*1e9)
	if m.rest > 0 {
		bare, end = end, end+m.rest
		marks += fmt.Sprintf("load,name=pan newton=0,step=\"bare\" %d\n", int64(start+bare)*1e9)
	}
	noise := rand.New(rand.NewPCG(7, 7))
	var lines strings.Builder
	for t := 0.0; t <= end; {
		day := 2 * math.Pi * t / 86400
		mm := m.noise*noise.NormFloat64() + m.sag(m.newton, t-loaded) - m.sag(m.newton, t-bare)
		if t >= bare {
			mm += m.set
		}
		at := int64(start+t) * 1e9
		fmt.Fprintf(&lines, "indication,gauge=mid mm=%.3f %d\n", math.Round((2+mm)/m.grid)*m.grid, at)
		if m.room {
			fmt.Fprintf(&lines, "ambient,probe=air celsius=%.2f,humidity_percent=%.1f %d\n", 20+2*math.Cos(day), 50+5*math.Cos(day/3.7), at)
		}
		t += m.step(t-loaded, t-bare)
	}
	for name, text := range map[string]string{"rig.yaml": rig, "marks.lp": marks, "readings/000001.lp": lines.String()} {
		path := filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			return err
		}
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			return err
		}
	}
	return nil
}

// idle is the time between readings before the load, s.
func (m madeHold) idle() float64 {
	if m.before > 86400 {
		return m.every
	}
	return 5
}

// step is the time to the next reading, so long after loading and unloading, s.
func (m madeHold) step(loaded, bare float64) float64 {
	switch {
	case loaded < 0 && loaded+m.idle() >= 0 && m.first > 1: // nobody read while it was hung
		return -loaded + m.first
	case loaded < 0:
		return m.idle()
	case bare < 0 && bare+m.every >= 0 && !math.IsInf(bare, -1):
		return -bare
	case bare >= 0 && bare < 3600, bare < 0 && loaded < 3600 && m.first <= 1:
		return min(m.dense, m.every)
	}
	return m.every
}
