//go:build campaign

package main

// The simulated year of the whole check.
const (
	yearUsual    = 365.0
	yearAnalysed = true
)
