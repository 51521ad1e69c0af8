//go:build !campaign

package steps

// How much the random tests draw in a plain test; the full sizes run with
// go test -tags campaign.
const (
	stepsDrawn = 60
	calmDrawn  = 4
	foulDrawn  = 12
	calmDays   = 3
)
