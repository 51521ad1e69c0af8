package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/rogpeppe/go-internal/testscript"
	"go.yaml.in/yaml/v3"

	"gaugelog/analysis"
	"gaugelog/config"
	"gaugelog/ingest"
	"gaugelog/simulators"
)

// stories is where the rig and the truth lie that the stories share.
const stories = "testdata/story"

// rehearse is a command of the scripts: it lets the simulated rig of the
// stories play a test through the real device code into a run folder.
//
//	rehearse RUN [rig=FILE] [wired=FILE] [truth=FILE] [faults=FILE]
//
// rig is the rig file, wired the one that the recorder is given where it is a
// wrong one. The keys of truth go before those of the shared truth.
func rehearse(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) == 0 {
		ts.Fatalf("usage: rehearse RUN [rig=FILE] [wired=FILE] [truth=FILE] [faults=FILE]")
	}
	files := map[string]string{}
	for _, a := range args[1:] {
		k, v, _ := strings.Cut(a, "=")
		files[k] = v
	}
	rigText, err := os.ReadFile(filepath.Join(stories, "rig.yaml"))
	ts.Check(err)
	if f := files["rig"]; f != "" {
		rigText = []byte(ts.ReadFile(f))
	}
	rig, err := config.Parse("rig.yaml", rigText)
	ts.Check(err)
	recorded, recordedText := rig, rigText
	if f := files["wired"]; f != "" {
		recordedText = []byte(ts.ReadFile(f))
		recorded, err = config.Parse(f, recordedText)
		ts.Check(err)
	}
	truth, err := storyTruth(ts, files["truth"])
	ts.Check(err)
	faults := &simulators.Faults{}
	if f := files["faults"]; f != "" {
		faults, err = simulators.ParseFaults(f, []byte(ts.ReadFile(f)))
		ts.Check(err)
	}
	ts.Check(record(ts.MkAbs(args[0]), rig, recorded, recordedText, truth, faults))
}

// storyTruth is the shared truth with the keys of a file in place of its own.
func storyTruth(ts *testscript.TestScript, file string) (*simulators.Truth, error) {
	text, err := os.ReadFile(filepath.Join(stories, "truth.yaml"))
	if err != nil {
		return nil, err
	}
	var all map[string]any
	if err := yaml.Unmarshal(text, &all); err != nil {
		return nil, err
	}
	if file != "" {
		if err := yaml.Unmarshal([]byte(ts.ReadFile(file)), &all); err != nil {
			return nil, err
		}
	}
	if text, err = yaml.Marshal(all); err != nil {
		return nil, err
	}
	return simulators.ParseTruth("truth.yaml", text)
}

func record(into string, rig, recorded *config.Rig, text []byte, truth *simulators.Truth, faults *simulators.Faults) error {
	sim, err := simulators.New(simulators.Options{Rig: rig, Truth: truth, Faults: faults, Seed: 1})
	if err != nil {
		return err
	}
	dir, err := ingest.OpenDir(into, ingest.DirOptions{Create: true, Virtual: true})
	if err != nil {
		return err
	}
	defer dir.Close()
	c := &conductor{source: sim, computer: sim,
		runs: []*conductedRun{{rig: recorded, rigText: text, fs: dir.FS(), runID: "story"}}}
	return c.conduct(context.Background())
}

// happened is a command of the scripts: the disturbances that the analysis
// reports of a run are these and no others, in order of time. Each is a kind
// and, behind a blank, the gauges where they matter.
//
//	happened RUN 'KIND[ GAUGE,GAUGE..]'...
func happened(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) == 0 {
		ts.Fatalf("usage: happened RUN KIND...")
	}
	var out, errOut bytes.Buffer
	run([]string{"analyse", ts.MkAbs(args[0]), "--json"}, strings.NewReader(""), &out, &errOut)
	var r analysis.Result
	if err := json.Unmarshal(out.Bytes(), &r); err != nil {
		ts.Fatalf("analyse: %v\n%s", err, &errOut)
	}
	var got []string
	var told strings.Builder
	for i, d := range r.Disturbances {
		s := d.Kind
		if i < len(args)-1 && strings.Contains(args[i+1], " ") {
			s += " " + strings.Join(d.Gauges, ",")
		}
		got = append(got, s)
		to := ""
		if d.To != nil {
			to = *d.To
		}
		fmt.Fprintf(&told, "%s %v from %s to %s: %s\n", d.Kind, d.Gauges, d.From, to, d.Evidence)
	}
	if !slices.Equal(got, args[1:]) {
		ts.Fatalf("reported %q, want %q\n%s", got, args[1:], &told)
	}
}
