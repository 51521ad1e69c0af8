//go:build campaign

package main

import (
	"encoding/json"
	"testing"
	"time"

	"gaugelog/analysis"
)

// go test -tags campaign -run TestThorough -v ./cmd/gaugelog
//
// The 2e5 draws of the demonstration's inputs agree with the propagated
// interval; the log says how long they took.
func TestThoroughOnTheDemo(t *testing.T) {
	dir := demoRun(t)
	began := time.Now()
	code, out, errOut := gaugelog("analyse", dir, "--thorough", "--json")
	took := time.Since(began)
	if code != Done {
		t.Fatalf("analyse --thorough ended with %d: %s", code, errOut)
	}
	checkSchema(t, []byte(out))
	var r analysis.Result
	if err := json.Unmarshal([]byte(out), &r); err != nil {
		t.Fatal(err)
	}
	mc := r.Stiffness.MonteCarlo
	if mc == nil {
		t.Fatal("no draws in the result")
	}
	t.Logf("%.1f s: %s", took.Seconds(), mc.Text)
	if mc.Draws != 200_000 || mc.Refused != 0 || !mc.Agrees {
		t.Errorf("%d draws, %d refused, agree: %v", mc.Draws, mc.Refused, mc.Agrees)
	}
	if errOut != "" {
		t.Errorf("a bar or words where no terminal is: %q", errOut)
	}
}
