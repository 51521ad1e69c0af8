package main

import (
	"flag"
	"os"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

var update = flag.Bool("update", false, "write the outputs that differ into the scripts and golden files")

// TestMain lets the scripts run gaugelog as a process of its own, which is
// this test binary under another name.
func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"gaugelog": main})
}

// TestScripts runs every script of testdata/script: a shell-like file with the
// files it needs behind it.
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata/script",
		RequireExplicitExec: true,
		UpdateScripts:       *update,
		Cmds:                map[string]func(*testscript.TestScript, bool, []string){"rehearse": rehearse, "happened": happened, "hold": hold},
		Setup: func(e *testscript.Env) error {
			e.Setenv("TZ", "UTC")
			return os.MkdirAll(e.Getenv("HOME"), 0o755)
		},
	})
}
