//go:build unix && !linux

package device_test

import (
	"os"
	"testing"
)

func checkTermios(*testing.T, *os.File) {}
