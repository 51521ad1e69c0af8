//go:build !campaign

package steps

const (
	stepsUsual = 60
	calmUsual  = 4
	foulUsual  = 12
	calmDays   = 3
)
