//go:build campaign

package stiffness

import "testing"

// go test -tags campaign -run TestCoverageCampaign -v ./analysis/stiffness
func TestCoverageCampaign300(t *testing.T) {
	if share := coverage(t, 300, 11); share < 0.91 || share > 0.99 {
		t.Errorf("%.2f %% of 300 intervals hold the truth, want 91 to 99 %%", 100*share)
	}
}

func TestCoverageCampaign2000(t *testing.T) {
	if share := coverage(t, 2000, 13); share < 0.935 || share > 0.965 {
		t.Errorf("%.2f %% of 2000 intervals hold the truth, want 93.5 to 96.5 %%", 100*share)
	}
}
