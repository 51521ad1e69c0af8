//go:build campaign

package steps

// The full sizes:
//
//	go test -tags campaign -timeout 6h -run 'Covers|Calm|Foul' -v ./analysis/steps
const (
	stepsDrawn = 2000
	calmDrawn  = 1000
	foulDrawn  = 1000
	calmDays   = 30
)
