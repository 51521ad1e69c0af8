package simulators

import (
	"embed"
	"fmt"
	"io"

	"gaugelog/config"
)

// The bench's files: two rigs on one computer with seven instruments, one of
// each kind of frame and one more on the multiplexer and on the bus that the
// rigs share, for an hour in which everything goes wrong that can.
//
//go:embed bench/*.yaml
var benchFiles embed.FS

// BenchRigs is how many rigs the bench has.
const BenchRigs = 2

// BenchRig loads one rig of the bench, 1 or 2. It cannot fail but by a
// programmer's mistake, which it panics for.
func BenchRig(n int) Demo {
	if n < 1 || n > BenchRigs {
		panic(fmt.Sprintf("the bench has rigs 1 and 2, not %d", n))
	}
	file := func(kind string) (string, []byte) {
		name := fmt.Sprintf("%s%d.yaml", kind, n)
		text, err := benchFiles.ReadFile("bench/" + name)
		if err != nil {
			panic(err)
		}
		return name, text
	}
	must := func(err error) {
		if err != nil {
			panic(fmt.Sprintf("the bench's files: %v", err))
		}
	}
	var d Demo
	var err error
	name, text := file("rig")
	d.RigText = text
	d.Rig, err = config.Parse(name, text)
	must(err)
	name, text = file("truth")
	d.Truth, err = ParseTruth(name, text)
	must(err)
	name, text = file("faults")
	d.Faults, err = ParseFaults(name, text)
	must(err)
	return d
}

// Bench builds both rigs of the bench, joined. frames may be nil; asked and
// frames are as in [Options].
func Bench(seed uint64, asked bool, frames io.Writer) (*Joint, error) {
	var sims []*Sim
	for n := range BenchRigs {
		d := BenchRig(n + 1)
		s, err := New(Options{Rig: d.Rig, Truth: d.Truth, Faults: d.Faults, Seed: seed + uint64(n), Asked: asked, Frames: frames})
		if err != nil {
			return nil, err
		}
		sims = append(sims, s)
	}
	return Join(sims...)
}
