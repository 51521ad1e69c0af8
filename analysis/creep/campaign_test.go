//go:build campaign

package creep

import "testing"

// The full coverage campaign; see coverage_test.go. Run with
//
//	go test -tags campaign -run TestCoverageCampaign -v -timeout 60m ./analysis/creep
func TestCoverageCampaign(t *testing.T) {
	c := coverage(t, 30000, 1000, true)
	c.log(t)
	for name, hit := range map[string]int{"n": c.n, "sag": c.sag} {
		if share := float64(hit) / float64(c.tests); share < 0.93 || share > 0.97 {
			t.Errorf("95 %% intervals of %s hold the truth in %.1f %%, want 93 to 97", name, 100*share)
		}
	}
	if share := float64(c.averaged) / float64(c.tests); share < 0.93 {
		t.Errorf("averaged intervals hold the truth in %.1f %%, want 93 or more", 100*share)
	}
	if c.widthRatio > 2 {
		t.Errorf("averaged intervals are %.2f times as wide, want at most 2", c.widthRatio)
	}
}

// The full acceleration campaigns; see watch_test.go. Run with
//
//	go test -tags campaign -run 'TestFailuresCampaign|TestSoundCampaign' -v -timeout 60m ./analysis/creep
func TestFailuresCampaign(t *testing.T) {
	w := failures(t, 80000, 500)
	t.Logf("clear-area in time in %d of %d, median lead %.1f h", w.inTime, w.tests, w.medianLead)
	for _, m := range w.missed {
		t.Log(m)
	}
	if w.inTime < 495 {
		t.Errorf("clear-area in time in %d of 500, want 495", w.inTime)
	}
}

// TestSoundCampaign is its other half.
func TestSoundCampaign(t *testing.T) {
	sound := soundTests(t, 80000, 500)
	t.Logf("%d of 500 sound tests raised a warning", len(sound))
	for _, m := range sound {
		t.Log(m)
	}
	if len(sound) > 2 {
		t.Errorf("%d sound tests of 500 raised a warning, want at most 2", len(sound))
	}
}

// The first tests of each campaign, for a check of every change: the bands are
// those asked, wider by three binomial standard deviations of so few tests. Run
// with
//
//	go test -tags campaign -run Fewer -v -timeout 15m ./analysis/creep
func TestFewerCoverage(t *testing.T) {
	t.Parallel()
	c := coverage(t, 30000, 400, true)
	c.log(t)
	for name, hit := range map[string]int{"n": c.n, "sag": c.sag} {
		if hit < heldLeast(0.93, c.tests) || hit > c.tests-heldLeast(0.03, c.tests) {
			t.Errorf("95 %% intervals of %s hold the truth in %d of %d", name, hit, c.tests)
		}
	}
	if c.averaged < heldLeast(0.93, c.tests) || c.widthRatio > 2 || c.failed > 0 {
		t.Errorf("%+v", c)
	}
}

// TestFewerFailures is its part of the failures.
func TestFewerFailures(t *testing.T) {
	t.Parallel()
	w := failures(t, 80000, 250)
	t.Logf("clear-area in time in %d of %d, median lead %.1f h; missed: %v", w.inTime, w.tests, w.medianLead, w.missed)
	if w.inTime < heldLeast(0.99, w.tests) {
		t.Errorf("clear-area in time in %d of %d", w.inTime, w.tests)
	}
}

// TestFewerSound is its part of the sound tests.
func TestFewerSound(t *testing.T) {
	t.Parallel()
	const tests = 200
	sound := soundTests(t, 80000, tests)
	t.Logf("%d of %d sound tests raised a warning: %v", len(sound), tests, sound)
	if tests-len(sound) < heldLeast(1-0.004, tests) {
		t.Errorf("%d sound tests of %d raised a warning", len(sound), tests)
	}
}
