package steps

import "math"

// foul is an undisturbed test and one disturbance of at least ten times
// max(noise, resolution/sqrt 12) and two counts.
func foul(seed uint64, days float64) *month {
	m := drawMonth(seed, days)
	rng := m.rng
	size := m.least * (1 + 9*rng.Float64())
	if rng.IntN(2) == 0 {
		size = -size
	}
	m.from = m.length * (0.15 + 0.6*rng.Float64())
	g := 2 + rng.IntN(len(m.gauges)-3)
	for kind := rng.IntN(len(fouls)); !fouls[kind](m, g, size); kind = rng.IntN(len(fouls)) {
	}
	return m
}

// fouls draw a disturbance each; false where this test cannot show it.
var fouls = []func(m *month, g int, size float64) bool{
	func(m *month, g int, size float64) bool { // a touch of a second or of minutes
		m.kind, m.to = Spike, m.from+1+2*m.rng.Float64()
		if m.rng.IntN(2) == 0 {
			m.to = m.from + 10 + 700*m.rng.Float64()
		}
		m.faults = []fault{{gauge: g, from: m.from, to: m.to, by: size}}
		return true
	},
	func(m *month, g int, size float64) bool { // one gauge knocked
		m.kind = GaugeKnock
		m.faults = []fault{{gauge: g, from: m.from, by: size}}
		return true
	},
	func(m *month, g int, size float64) bool { // the bench knocked
		m.kind = BenchKnock
		for i := range m.gauges {
			m.faults = append(m.faults, fault{gauge: i, from: m.from, by: size * (1 + 0.4*m.rng.Float64())})
		}
		return true
	},
	func(m *month, g int, size float64) bool { // zero pressed
		m.kind = ZeroPressed
		m.faults = []fault{{gauge: g, from: m.from, what: "zero"}}
		return true
	},
	func(m *month, g int, size float64) bool { // a load changed for good
		m.kind = LoadChanged
		n := m.changes[0].newton
		m.changes = append(m.changes, wchange{at: m.from, late: math.NaN(), newton: []float64{n[0] + size/m.deepest(), n[1]}})
		return true
	},
	func(m *month, g int, size float64) bool { // a tool left on the beam
		m.kind, m.to = LoadChanged, m.from+600+40000*m.rng.Float64()
		m.temporaryLoad = [3]float64{math.Abs(size) / m.deepest(), m.from, m.to}
		return true
	},
	func(m *month, g int, size float64) bool { // the unit key, and back or not
		m.kind = UnitKey
		if m.rng.IntN(2) == 0 {
			m.to = m.from + 3600 + 2*86400*m.rng.Float64()
		}
		m.faults = []fault{{gauge: g, from: m.from, to: m.to, what: "inch"}}
		return true
	},
	func(m *month, g int, size float64) bool { // nothing read
		m.kind, m.to = GapKind, m.from+2400+7200*m.rng.Float64()
		m.silent = [][2]float64{{m.from, m.to}}
		return true
	},
	func(m *month, g int, size float64) bool { // a support gives way
		m.kind = SupportShift
		m.settles = settling{right: m.rng.IntN(2) == 0, from: m.from, to: m.from + 0.5, mm: math.Abs(size)}
		return true
	},
	func(m *month, g int, size float64) bool { // a support settles slowly
		m.kind, m.to = SupportShift, m.from+1800+80000*m.rng.Float64()
		m.settles = settling{right: m.rng.IntN(2) == 0, from: m.from, to: m.to, mm: math.Abs(size)}
		return true
	},
	func(m *month, g int, size float64) bool { // on hold, while the beam went on
		m.kind, m.to = Frozen, m.from+(0.3+4*m.rng.Float64())*86400
		if lo, hi := m.reach(g); hi-lo < m.least {
			return false
		}
		m.faults = []fault{{gauge: g, from: m.from, to: m.to, what: "freeze"}}
		return true
	},
	func(m *month, g int, size float64) bool { // the plunger reaches its end
		m.to = m.length
		m.kind = EndOfTravel
		lo, hi := m.reach(g)
		if hi-lo < 2*m.least || m.level(g, m.from) > hi-m.least {
			return false
		}
		sign := 1.0
		if m.gauges[g].sense == "up" {
			sign = -1
		}
		end := math.Round(sign*m.level(g, m.from)/m.gauges[g].res) * m.gauges[g].res
		m.travel = [2]float64{min(end, -sign*30), max(end, -sign*30)}
		m.faults = []fault{{gauge: g, from: m.from, what: "stop"}}
		return true
	},
	func(m *month, g int, size float64) bool { // knocked while nothing was read
		if m.rng.IntN(2) == 0 {
			return false
		}
		m.kind, m.to = GaugeKnock, m.from+1200+7200*m.rng.Float64()
		m.silent = [][2]float64{{m.from, m.to}}
		m.faults = []fault{{gauge: g, from: (m.from + m.to) / 2, by: size}}
		return true
	},
}

// deepest is the greatest sag of any gauge per newton of the first load.
func (m *month) deepest() float64 {
	best := 0.0
	for _, g := range m.gauges {
		if g.sees == "" {
			best = max(best, math.Abs(m.sagPer(g.at, m.loads[0])))
		}
	}
	return best
}

// reach is the range of a gauge's level within the disturbance's time.
func (m *month) reach(g int) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for t := m.from; t <= min(m.to, m.length); t += 1800 {
		v := m.level(g, t)
		lo, hi = min(lo, v), max(hi, v)
	}
	return lo, hi
}

// judge says whether the disturbance was found, named right, and whether that
// was among the candidates of an undecided one; others counts what else was
// reported.
func (m *month) judge(f *Findings) (found, right, open bool, others int) {
	// What has no sharp beginning may be told some time later.
	slack := 600.0
	if m.kind == GaugeKnock && m.to > 0 {
		slack += m.to - m.from
	}
	for _, d := range f.Disturbances {
		from, to := seconds(d.From-epoch), seconds(d.To-epoch)
		slow := m.kind == SupportShift && m.to > 0 || m.kind == Frozen || m.kind == EndOfTravel
		if apart := from > m.to || d.To != 0 && to < m.from; slow && apart || !slow && (from < m.from-max(slack, 3*m.every)/4-60 || from > m.from+slack) {
			others++
			continue
		}
		found = true
		right = right || d.Kind == m.kind
		for _, c := range d.Candidates {
			open = open || d.Kind == Undecided && c == m.kind
		}
		if d.Kind != m.kind && d.Kind != Undecided && !(d.Kind == GapKind && len(m.silent) > 0) {
			others++
		}
	}
	if right {
		open = false
	}
	return found, right, open, others
}
