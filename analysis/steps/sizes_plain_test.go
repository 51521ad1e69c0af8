//go:build !campaign

package steps

const (
	stepsUsual = 40
	calmUsual  = 3
	foulUsual  = 8
	calmDays   = 3
)
