package simulators

import (
	"encoding/json"
	"math"
	"os"
	"slices"
	"testing"

	"gaugelog/simulators/creep"
)

// larch is testdata/larch.json; its source stands in it.
type larch struct {
	At         []float64            `json:"gauges_at_mm"`
	Elastic    map[string][]float64 `json:"elastic_mm"`
	ElasticNet []float64            `json:"elastic_net_s4_mm"`
	Largest    struct {
		MM float64 `json:"mm"`
	} `json:"largest_net_s4"`
	NetGauges []string `json:"net_gauges"`
	Net       []struct {
		Step  string
		After float64 `json:"after_s"`
		MM    []float64
	} `json:"net_mm"`
	Gravity float64 `json:"gravity_m_s2"`
	Bending float64 `json:"bending_n_mm2"`
	Shear   float64 `json:"shear_n"`
}

func larchFigures(t *testing.T) larch {
	t.Helper()
	text, err := os.ReadFile("testdata/larch.json")
	if err != nil {
		t.Fatal(err)
	}
	var l larch
	if err := json.Unmarshal(text, &l); err != nil {
		t.Fatal(err)
	}
	return l
}

// bare is the demonstration without plungers, placing times, faults or late
// marks, so that it can be compared with figures computed without them.
func bare(t *testing.T) (Demo, *Sim) {
	t.Helper()
	d := DemoRig()
	none := NPerMM(0)
	d.Truth.Every.Stiffness = &none
	d.Truth.Place = TruthPlace{Takes: leastRamp}
	s, err := New(Options{Rig: d.Rig, Truth: d.Truth, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	return d, s
}

func TestLarchConstants(t *testing.T) {
	l := larchFigures(t)
	_, s := bare(t)
	_, bending, shear := s.Stiffness()
	if math.Abs(s.Gravity()-l.Gravity) > 6e-6 {
		t.Errorf("gravity %.7f, want %.5f", s.Gravity(), l.Gravity)
	}
	if math.Abs(bending/l.Bending-1) > 1e-5 || math.Abs(shear/l.Shear-1) > 2e-4 {
		t.Errorf("bending %g, shear %g; want %g, %g", bending, shear, l.Bending, l.Shear)
	}
}

// TestLarchElastic holds the absolute elastic displacements of all steps to
// the figures within 0.002 mm.
func TestLarchElastic(t *testing.T) {
	l := larchFigures(t)
	_, s := bare(t)
	b := *s.beam
	b.law = creep.Law{}
	for _, st := range s.Steps() {
		want, ok := l.Elastic[st.Step]
		if !ok {
			continue
		}
		at := seconds(st.Full)
		for i, x := range l.At {
			v := view{seat: -1, terms: []viewTerm{{x, 1}}}
			total, net := 0.0, 0.0
			for _, load := range s.timeline.loads {
				creeping, rigid := b.effect(v, load.where)
				total += (creeping + rigid) * load.force(at)
				net += creeping * load.force(at)
			}
			if math.Abs(total-want[i]) > 0.002 {
				t.Errorf("%s at %g mm: %.4f mm, want %.3f", st.Step, x, total, want[i])
			}
			if st.Step == "s4" && math.Abs(net-l.ElasticNet[i]) > 0.002 {
				t.Errorf("net at %g mm: %.4f mm, want %.3f", x, net, l.ElasticNet[i])
			}
		}
	}
	if len(l.Elastic) != 4 {
		t.Errorf("%d steps in the figures", len(l.Elastic))
	}
}

// TestLarchCreep holds the net sags under superposition to the figures within
// 0.002 mm.
func TestLarchCreep(t *testing.T) {
	l := larchFigures(t)
	_, s := bare(t)
	checked := 0
	for _, c := range l.Net {
		i := slices.IndexFunc(s.Steps(), func(st StepTruth) bool { return st.Step == c.Step })
		// The figures count from a jump: the middle of the short ramp.
		at := (s.Steps()[i].From+s.Steps()[i].Full)/2 + nanoseconds(c.After)
		for j, name := range l.NetGauges {
			_, net, ok := s.Sag(name, min(at, s.Steps()[i].To))
			if !ok {
				t.Fatalf("no gauge %q", name)
			}
			checked++
			if math.Abs(net-c.MM[j]) > 0.002 {
				t.Errorf("%s + %g s, %s: %.4f mm, want %.3f", c.Step, c.After, name, net, c.MM[j])
			}
		}
	}
	if checked != 44 {
		t.Errorf("%d figures checked", checked)
	}
}

// TestLargest finds the greatest net sag of the last step along the plank. Its
// place is held to the closed form: where the slope of the two loads' handbook
// formulas, with the shear's slope between them, is zero.
func TestLargest(t *testing.T) {
	l := larchFigures(t)
	_, s := bare(t)
	at, most := 0.0, 0.0
	for x := 1300.0; x < 1350; x += 0.1 {
		sum := 0.0
		for _, load := range s.timeline.loads {
			creeping, _ := s.beam.effect(view{seat: -1, terms: []viewTerm{{x, 1}}}, load.where)
			sum += creeping * load.force(seconds(s.Steps()[4].Full))
		}
		if sum > most {
			at, most = x, sum
		}
	}
	const L, a, b = 2100.0, 700.0, 1400.0
	p, q := 32.5*s.Gravity(), 17.5*s.Gravity()
	slope := func(x float64) float64 {
		bend := p*a*(2*L*L-6*L*x+3*x*x+a*a) + q*(L-b)*(L*L-(L-b)*(L-b)-3*x*x)
		return bend/(6*L*s.beam.bending) + (q*(L-b)/L-p*a/L)/s.beam.shear
	}
	want := 1000.0
	for step := 64.0; step > 1e-3; step /= 2 {
		if slope(want+step) > 0 {
			want += step
		}
	}
	if math.Abs(most-l.Largest.MM) > 0.0005 || math.Abs(at-300-want) > 0.2 {
		t.Errorf("largest %.4f mm at %.1f, want %.4f at %.1f", most, at, l.Largest.MM, 300+want)
	}
}
