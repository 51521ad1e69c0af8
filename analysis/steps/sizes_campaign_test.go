//go:build campaign

package steps

const (
	stepsUsual = 400
	calmUsual  = 120
	foulUsual  = 120
	calmDays   = 30
)
