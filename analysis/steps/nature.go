package steps

import (
	"fmt"
	"math"

	"gaugelog/analysis/lsq"
)

// nature tells what a lasting cluster was, from which gauges moved and in
// what proportion.
func (r *run) nature(e *cluster, pats []pattern) verdict {
	moved := e.movedGauges()
	load, support := r.best(e, pats, LoadChanged), r.best(e, pats, SupportShift)
	refMoved := false
	for _, g := range moved {
		refMoved = refMoved || r.gauges[g].cfg.Sees == "reference"
	}
	bench, benchSure := r.bench(e, moved)
	if refMoved {
		load, support = nil, nil
	}
	if e.gap {
		return r.acrossGap(e, moved, load, bench, support)
	}
	if len(moved) == 1 {
		return r.single(e, moved[0], load, support)
	}
	switch {
	case load != nil && bench && !benchSure && r.flat(e, moved):
		return verdict{kind: Undecided, candidates: []Kind{LoadChanged, BenchKnock}, fit: load,
			evidence: fmt.Sprintf("%s moved both as a load on %s and as a knock on their stand would; no reference gauge tells", r.names(moved), load.p.which)}
	case load != nil && (support == nil || load.worst < support.worst):
		return verdict{kind: LoadChanged, fit: load,
			evidence: fmt.Sprintf("%s moved in the proportions of load %s", r.names(moved), load.p.which)}
	case support != nil:
		return verdict{kind: SupportShift, fit: support,
			evidence: fmt.Sprintf("%s moved along a straight line through the other support: support %s went %s", r.names(moved), support.p.which, downUp(support.a))}
	case bench:
		return verdict{kind: BenchKnock,
			evidence: fmt.Sprintf("every gauge on the stand moved (%s), not in the proportions of any load", r.names(moved))}
	}
	c := []Kind{GaugeKnock, BenchKnock}
	if !refMoved {
		c = append(c, LoadChanged, SupportShift)
	}
	return verdict{kind: Undecided, candidates: c,
		evidence: fmt.Sprintf("%s moved, in the proportions of no load, no support and no whole stand", r.names(moved))}
}

func downUp(a float64) string {
	if a < 0 {
		return "up"
	}
	return "down"
}

// best returns the pattern of a kind that fits best, nil where none fits. Of
// several loads that fit, the one of the likest proportions is taken: how far
// the worst gauge is off says little of that, for supports yield with any load.
func (r *run) best(e *cluster, pats []pattern, k Kind) *fitted {
	var best *fitted
	likest := 0.0
	for _, p := range pats {
		if p.kind != k {
			continue
		}
		f, ok := r.fit(e, p)
		if !ok || f.worst >= 1 || math.Abs(f.a) < 3*f.ua {
			continue
		}
		better := best == nil || f.worst < best.worst
		if k == LoadChanged {
			better = math.Abs(r.alike(e, p.v)) > likest
		}
		if better {
			c := f
			best, likest = &c, math.Abs(r.alike(e, p.v))
		}
	}
	return best
}

// single tells what one gauge alone did.
func (r *run) single(e *cluster, g int, load, support *fitted) verdict {
	if r.becameZero(e, g) {
		return verdict{kind: ZeroPressed, evidence: fmt.Sprintf("gauge %s showed 0 from then on", r.name(g))}
	}
	others := 0
	for i, k := range e.known {
		if k && i != g && r.seesBeam(i) {
			others++
		}
	}
	if others == 0 && r.gauges[g].cfg.Sees != "reference" {
		return verdict{kind: Undecided, candidates: []Kind{GaugeKnock, BenchKnock, LoadChanged}, fit: load,
			evidence: fmt.Sprintf("gauge %s moved and no other gauge was there to compare it with", r.name(g))}
	}
	if load != nil || support != nil {
		c := []Kind{GaugeKnock}
		if load != nil {
			c = append(c, LoadChanged)
		}
		if support != nil {
			c = append(c, SupportShift)
		}
		return verdict{kind: Undecided, candidates: c, fit: load,
			evidence: fmt.Sprintf("only gauge %s moved, but by so little that the others could not have shown it", r.name(g))}
	}
	return verdict{kind: GaugeKnock, evidence: fmt.Sprintf("only gauge %s moved", r.name(g))}
}

// becameZero says whether a gauge's indication is 0 within a count after the
// cluster and was not before.
func (r *run) becameZero(e *cluster, g int) bool {
	gg := &r.gauges[g]
	before, after := rawEdges(e, g)
	if len(before) == 0 || len(after) == 0 {
		return false
	}
	if len(after) > 5 {
		after = after[:5]
	}
	return math.Abs(lsq.Median(after)) <= gg.res*1.01+2*gg.noise && math.Abs(lsq.Median(before)) > 3*gg.res+6*gg.noise
}

// rawEdges returns the indications just before and just behind a cluster.
func rawEdges(e *cluster, g int) (before, after []float64) {
	for _, p := range e.raw[g] {
		if p.t <= e.lo {
			before = append(before, p.raw)
		} else if p.t >= e.hi {
			after = append(after, p.raw)
		}
	}
	if len(before) > sides {
		before = before[len(before)-sides:]
	}
	if len(after) > sides {
		after = after[:sides]
	}
	return before, after
}

// stand names the stand of a gauge. Where the rig file names none at all,
// every gauge is taken to share one.
func (r *run) stand(g int) string {
	named := false
	for i := range r.gauges {
		named = named || r.gauges[i].cfg.Stand != ""
	}
	s := r.gauges[g].cfg.Stand
	if s == "" && named {
		return "alone " + r.name(g)
	}
	return s
}

// bench says whether the moved gauges are all those of one stand; sure where
// a reference gauge among them, or a gauge off the stand, tells.
func (r *run) bench(e *cluster, moved []int) (is, sure bool) {
	if len(moved) < 2 {
		return false, false
	}
	s := r.stand(moved[0])
	for _, g := range moved {
		if r.stand(g) != s {
			return false, false
		}
		sure = sure || r.gauges[g].cfg.Sees == "reference"
	}
	still := 0
	for g := range r.gauges {
		if e.known[g] && r.stand(g) == s && !e.moved[g] {
			still++
		}
	}
	// A tilt may leave one gauge of several where it was.
	return still == 0 || still == 1 && len(moved) >= 3, sure
}

// flat says that the moved gauges moved as a rigid stand would: along a
// straight line in their places.
func (r *run) flat(e *cluster, moved []int) bool {
	if len(moved) <= 2 {
		return true
	}
	var x, y, u []float64
	for _, g := range moved {
		x, y, u = append(x, r.gauges[g].cfg.At.Value), append(y, e.jump[g].MM), append(u, r.jumpU(e, g))
	}
	f, ok := fitPoly(x, y, u, 1)
	if !ok {
		return false
	}
	for i := range x {
		if math.Abs(y[i]-f.at(x[i])) > 4*u[i] {
			return false
		}
	}
	return true
}

// acrossGap names what may have happened while nothing was read.
func (r *run) acrossGap(e *cluster, moved []int, load *fitted, bench bool, support *fitted) verdict {
	var c []Kind
	if len(moved) == 1 {
		c = append(c, GaugeKnock)
		if r.becameZero(e, moved[0]) {
			c = []Kind{ZeroPressed, GaugeKnock}
		}
	}
	if load != nil {
		c = append(c, LoadChanged)
	}
	if support != nil {
		c = append(c, SupportShift)
	}
	if bench {
		c = append(c, BenchKnock)
	}
	if len(c) == 0 {
		c = []Kind{GaugeKnock, BenchKnock, LoadChanged}
	}
	return verdict{kind: Undecided, candidates: c, fit: load,
		evidence: fmt.Sprintf("%s moved while nothing was read for %.0f s", r.names(moved), seconds(e.hi-e.lo))}
}
