package stiffness

import (
	"errors"
	"fmt"
	"math"
)

// prepare sorts the input into rows and changes of load.
func prepare(in *Input) (*model, error) {
	if err := in.check(); err != nil {
		return nil, err
	}
	sec, err := SectionOf(in.Rig.Specimen.Section)
	if err != nil {
		return nil, err
	}
	m := &model{rig: in.Rig, sec: sec, determinate: determinateLayout(in.Rig)}
	for i, l := range in.Rig.Loads {
		if from, _ := loadPlaces(l); math.IsNaN(from) {
			return nil, fmt.Errorf("load %s has no place; mend: give it at, or from and to", in.Rig.Loads[i].Name)
		}
	}
	before := forces(in, in.Baseline)
	for k, s := range in.Steps {
		now := forces(in, s.Loads)
		var cs []change
		for i := range in.Rig.Loads {
			cs = append(cs, changed(i, before[i], now[i])...)
		}
		m.changes = append(m.changes, cs)
		before = now
		m.take(in, k, s)
	}
	if len(m.rows) == 0 {
		return nil, errors.New("no gauge answered a change of load whose loads are marked; mend: enter the marks of the loads (`gaugelog mark RUN LOAD VALUE --when TIME`), or check that the gauges touch the beam, and their sense")
	}
	for s := range in.Rig.Supports {
		if m.watched(s) {
			m.yields = append(m.yields, s)
		}
	}
	return m, nil
}

// part is a load's force, apart by whether gravity makes it.
type part struct{ weighed, direct float64 }

func forces(in *Input, loads []StepLoad) []part {
	out := make([]part, len(in.Rig.Loads))
	for _, l := range loads {
		for i, r := range in.Rig.Loads {
			if r.Name != l.Load {
				continue
			}
			if l.Weighed {
				out[i].weighed += l.N
			} else {
				out[i].direct += l.N
			}
		}
	}
	return out
}

func changed(load int, before, now part) []change {
	var out []change
	if d := now.weighed - before.weighed; d != 0 {
		out = append(out, change{load, d, true})
	}
	if d := now.direct - before.direct; d != 0 {
		out = append(out, change{load, d, false})
	}
	return out
}

// take adds step k's readings and the pushes of the plungers they imply.
func (m *model) take(in *Input, k int, s StepObs) {
	push := make([]float64, len(in.Rig.Gauges))
	for _, o := range s.Gauges {
		g := in.Rig.Gauges[o.Gauge]
		if sees(g) == "reference" {
			continue
		}
		u, before := o.U, o.UBefore
		if u == 0 {
			u = g.Resolution.Value / math.Sqrt(6) // two plateaus, d/sqrt12 each
		}
		if before == 0 || before > u {
			before = u / math.Sqrt2
		}
		if g.U != nil {
			own := g.U.Value
			u, before = math.Hypot(u, math.Sqrt2*own), math.Hypot(before, own)
		}
		if u == 0 {
			u, before = 1e-9, 1e-9/math.Sqrt2
		}
		m.rows = append(m.rows, observation{step: k, gauge: o.Gauge, mm: o.MM, u: u, uBefore: before, carried: o.Carried, dof: o.DOF})
		if sees(g) == "beam" && len(g.Bar) == 0 {
			push[o.Gauge] = o.MM
		}
	}
	m.springs = append(m.springs, push)
}

// watched reports whether a gauge that was read shows how support s yields:
// on its seat, or on the beam so near to it that the beam's own sag there is
// small.
func (m *model) watched(s int) bool {
	sup := m.rig.Supports[s]
	reach := math.Max(m.sec.Depth, 0.02*m.rig.Specimen.Length.Value)
	for i, g := range m.rig.Gauges {
		if !m.reads(i) || seat(m.rig, g.At.Value) != s {
			continue
		}
		if sees(g) == "seat" || (sees(g) == "beam" && len(g.Bar) == 0 && math.Abs(g.At.Value-sup.At.Value) <= reach) {
			return true
		}
	}
	return false
}
