package steps

import "testing"

// Undisturbed tests raise no alarm, however sunny the afternoons.
func TestCalm(t *testing.T) {
	alarms, years := 0, 0.0
	for i := range *calmDrawn {
		if i > 0 && i%50 == 0 {
			t.Logf("%d so far: %d alarms", i, alarms)
		}
		m := drawMonth(seedOf(5000, i), calmDays)
		f := m.find(t)
		years += calmDays / 365.25 * float64(len(m.gauges))
		if len(f.Disturbances) > 0 || len(f.Steps) != 2 {
			alarms++
			t.Logf("seed %d: %d steps,%s", seedOf(5000, i), len(f.Steps), tell(f))
		}
	}
	t.Logf("%d of %d undisturbed tests of %g days raised an alarm: %.3f a gauge-year, of %.1f gauge-years", alarms, *calmDrawn, float64(calmDays), float64(alarms)/years, years)
	if float64(alarms) > atMost(0.005, *calmDrawn) {
		t.Errorf("%d of %d (at most 5 in 1,000)", alarms, *calmDrawn)
	}
}

// One disturbance is found and named right, or left undecided with the truth
// among its candidates.
func TestFoul(t *testing.T) {
	found, named, undecided, beside := 0, 0, 0, 0
	kinds := map[Kind][3]int{}
	for i := range *foulDrawn {
		if i > 0 && i%50 == 0 {
			t.Logf("%d so far: %d found, %d named right, %d undecided, %d with another beside", i, found, named, undecided, beside)
		}
		m := foul(seedOf(9000, i), calmDays)
		f := m.find(t)
		hit, right, open, others := m.judge(f)
		k := kinds[m.kind]
		k[0]++
		if hit {
			found++
			k[1]++
		}
		if right || open {
			named++
			k[2]++
		} else {
			t.Logf("seed %d: %s at %.0f s to %.0f came out as%s", seedOf(9000, i), m.kind, m.from, m.to, tell(f))
		}
		if open {
			undecided++
		}
		if others > 0 {
			beside++
			if right || open {
				t.Logf("seed %d: beside %s at %.0f s to %.0f also%s", seedOf(9000, i), m.kind, m.from, m.to, tell(f))
			}
		}
		kinds[m.kind] = k
	}
	for k, n := range kinds {
		t.Logf("%-14s %4d drawn, %4d found, %4d named right", k, n[0], n[1], n[2])
	}
	t.Logf("of %d disturbances %d found, %d named right (%d of them undecided with the truth among the candidates); %d had another reported beside", *foulDrawn, found, named, undecided, beside)
	if float64(found) < atLeast(0.99, *foulDrawn) || float64(named) < atLeast(0.98, *foulDrawn) || float64(undecided) > atMost(0.1, *foulDrawn) {
		t.Errorf("found %d, named %d, undecided %d of %d (want 99 %%, 98 %%, at most 10 %%)", found, named, undecided, *foulDrawn)
	}
}
