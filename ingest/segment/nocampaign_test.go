//go:build !campaign

package segment_test

// campaign is false in the everyday run; see campaign_test.go.
const campaign = false
