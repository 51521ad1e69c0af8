//go:build campaign

package analysis

import "testing"

// go test -tags campaign -run TestCoverage300 -v ./analysis
func TestCoverage300(t *testing.T) {
	if share := coverage(t, 300, 11); share < 0.91 || share > 0.99 {
		t.Errorf("%.2f %% of 300 intervals hold the truth, want 91 to 99 %%", 100*share)
	}
}

// go test -tags campaign -run TestCoverage2000 -v -timeout 60m ./analysis
func TestCoverage2000(t *testing.T) {
	if testing.Short() {
		t.Skip("2000 simulated tests take minutes; run without -short")
	}
	if share := coverage(t, 2000, 13); share < 0.935 || share > 0.965 {
		t.Errorf("%.2f %% of 2000 intervals hold the truth, want 93.5 to 96.5 %%", 100*share)
	}
}
