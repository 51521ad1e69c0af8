//go:build !campaign

package device_test

const replugs = 100
