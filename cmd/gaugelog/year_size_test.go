//go:build !campaign

package main

// The simulated year of the tests for every change: some days long, and not
// analysed, which other tests do.
const (
	yearUsual    = 6.5
	yearAnalysed = false
)
