//go:build campaign

package device_test

// go test -tags campaign -run ReplugsOverPTY ./device
const replugs = 10_000
