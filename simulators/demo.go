package simulators

import (
	_ "embed" // the demonstration's files
	"fmt"
	"regexp"

	"gaugelog/config"
)

// The demonstration's files: a larch plank with eight gauges, four load steps,
// a week under load and a day of recovery.
var (
	//go:embed demo/rig.yaml
	demoRig []byte
	//go:embed demo/truth.yaml
	demoTruth []byte
	//go:embed demo/faults.yaml
	demoFaults []byte
)

// Demo is the demonstration's rig.
type Demo struct {
	// RigText is the rig file, with comments, as it is to be recorded.
	RigText []byte
	Rig     *config.Rig
	Truth   *Truth
	Faults  *Faults
}

// DemoRig loads the demonstration. It cannot fail but by a programmer's
// mistake in the embedded files, which it panics for.
func DemoRig() Demo {
	rig, err := config.Parse("rig.yaml", demoRig)
	if err != nil {
		panic(fmt.Sprintf("the demonstration's rig file: %v", err))
	}
	truth, err := ParseTruth("truth.yaml", demoTruth)
	if err != nil {
		panic(fmt.Sprintf("the demonstration's truth: %v", err))
	}
	faults, err := ParseFaults("faults.yaml", demoFaults)
	if err != nil {
		panic(fmt.Sprintf("the demonstration's faults: %v", err))
	}
	return Demo{RigText: append([]byte(nil), demoRig...), Rig: rig, Truth: truth, Faults: faults}
}

// DemoTruthText and DemoFaultsText are the other two files, for who wants to
// start from them.
func DemoTruthText() []byte { return append([]byte(nil), demoTruth...) }

// DemoFaultsText is the demonstration's fault file.
func DemoFaultsText() []byte { return append([]byte(nil), demoFaults...) }

var portKey = regexp.MustCompile(`(\bport:[ \t]*)(?:"([^"\n]*)"|'([^'\n]*)'|([^\s,}#"'][^\s,}#]*))`)

// Rewire puts device paths in the place of the ports in a rig file's text, so
// that a program elsewhere can read the simulated ones: paths is keyed by what
// the rig file says now, such as sim:mid. Every other byte stays.
func Rewire(rig []byte, paths map[string]string) []byte {
	return portKey.ReplaceAllFunc(rig, func(m []byte) []byte {
		part := portKey.FindSubmatch(m)
		for _, name := range part[2:] {
			if path, ok := paths[string(name)]; ok && len(name) > 0 {
				return fmt.Appendf(nil, "%s%q", part[1], path)
			}
		}
		return m
	})
}
