package main

import (
	"math"
	"os"
	"runtime/debug"
)

// An analysis may use this much memory before it collects what it let go, the
// same for a short run and a long one: with a hundred megabytes at hand,
// collecting at every doubling of a few would only cost time.
const (
	analysisMemory  = 96 << 20 // bytes
	analysisPercent = -1       // at the bound only
)

// collectSeldom sets the bound for the rest of a command, unless the
// environment says otherwise; what it returns puts things back. A recording
// never calls it: it must stay small.
func collectSeldom() (restore func()) {
	percent, limit := math.MinInt, int64(-1)
	if os.Getenv("GOGC") == "" {
		percent = debug.SetGCPercent(analysisPercent)
	}
	if os.Getenv("GOMEMLIMIT") == "" {
		limit = debug.SetMemoryLimit(analysisMemory)
	}
	return func() {
		if percent != math.MinInt {
			debug.SetGCPercent(percent)
		}
		if limit >= 0 {
			debug.SetMemoryLimit(limit)
		}
	}
}
