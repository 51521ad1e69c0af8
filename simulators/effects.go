package simulators

import (
	"fmt"
	"math"
	"slices"
)

// effect is a fault in force from from to to (ns).
type effect struct {
	kind     string
	from, to int64
	gauge    *instrument // nil: all of a port
	size     float64
	share    float64
	limit    float64
	delay    int64
	truth    *FaultTruth
}

const forever = math.MaxInt64

func (e *effect) on(at int64, g *instrument) bool {
	return e.from <= at && at < e.to && (e.gauge == nil || e.gauge == g)
}

// FaultTruth is a fault that happened.
type FaultTruth struct {
	Fault Fault
	// From and To in nanoseconds from the start; To is the end of the test
	// where the fault lasted.
	From, To int64
	// Gauges are those it touched.
	Gauges []string
	// Frames counts the frames sent while it was in force on their gauge or,
	// for faults of a line, those it touched, so far.
	Frames int
	// MM is the jump of the apparent sag it made, for a zero pressed; NaN is
	// never used, 0 where it has not happened yet.
	MM float64
}

// schedule lays the faults out.
func (s *Sim) schedule(faults *Faults, seed uint64) error {
	for i, l := range s.lines {
		l.random = stream(seed, "line "+s.ports[i].Name)
	}
	for i, f := range faults.Faults {
		if err := s.lay(f); err != nil {
			where := faults.name
			if where == "" {
				where = "faults"
			}
			return fmt.Errorf("%s: fault %d (%s): %w", where, i+1, f.Kind, err)
		}
	}
	for _, g := range s.gauges {
		slices.SortStableFunc(g.effects, func(a, b *effect) int { return int(min(1, max(-1, a.from-b.from))) })
	}
	slices.SortFunc(s.cuts, func(a, b Interval) int { return int(min(1, max(-1, a.From-b.From))) })
	return nil
}

// lay lays one fault out.
func (s *Sim) lay(f Fault) error {
	at, err := s.timeline.instant(f.At, f.After)
	if err != nil {
		return err
	}
	from, to := nanoseconds(at), int64(forever)
	if from < 0 || from >= s.end {
		return fmt.Errorf("it lies %g s from the start, outside the test", at)
	}
	if f.For > 0 {
		to = nanoseconds(at + float64(f.For))
	}
	truth := &FaultTruth{Fault: f, From: from, To: min(to, s.end)}
	s.log = append(s.log, truth)
	e := &effect{kind: f.Kind, from: from, to: to, size: float64(f.Size), share: given(f.Share, 1), delay: nanoseconds(float64(f.Delay)), truth: truth}
	if f.Limit != nil {
		e.limit = float64(*f.Limit)
	}
	switch f.Kind {
	case PowerOff:
		return s.cutPower(from, to)
	case LoadChange:
		return s.changeLoad(f, at)
	case SupportMove:
		return s.moveSupport(f, at)
	case Garble, DropBytes, Stall, Unplug, Echo, LateReply, Noise, Endless:
		return s.layLine(f, e)
	case Press:
		return s.layPress(f, e)
	}
	touched := 0
	for _, g := range s.gauges {
		if f.Stand != "" && f.Kind == StandKnock && s.standOf(g) != f.Stand || f.Kind != StandKnock && g.name != f.Gauge {
			continue
		}
		if g.probe != nil && f.Kind != BatteryLow && f.Kind != OverRange {
			continue
		}
		if f.Kind == UnitKey && !g.gauge.bothUnits {
			return fmt.Errorf("the frame of %s does not say its unit: nobody could tell that its key was pressed", g.name)
		}
		own := *e
		own.gauge = g
		g.effects = append(g.effects, &own)
		truth.Gauges = append(truth.Gauges, g.name)
		touched++
	}
	if touched == 0 {
		return fmt.Errorf("there is no gauge %q or stand %q it could touch", f.Gauge, f.Stand)
	}
	return nil
}

func (s *Sim) standOf(g *instrument) string {
	return s.stands[g.place]
}

func (s *Sim) cutPower(from, to int64) error {
	to = min(to, s.end)
	for _, c := range s.cuts {
		if from < c.To && c.From < to {
			return fmt.Errorf("it overlaps another power cut")
		}
	}
	s.cuts = append(s.cuts, Interval{from, to})
	s.events = append(s.events, dueEvent{from, Event{Kind: PowerCut}}, dueEvent{to, Event{Kind: PowerBack}})
	return nil
}

func (s *Sim) changeLoad(f Fault, at float64) error {
	for i, l := range s.timeline.loads {
		if l.name != f.Load {
			continue
		}
		by := f.By.Newton + f.By.Kilogram*s.gravity
		l.changes = append(l.changes, change{from: at, to: at + 1, by: by})
		if f.For > 0 {
			back := at + max(1.1, float64(f.For))
			l.changes = append(l.changes, change{from: back, to: back + 1, by: -by})
		}
		s.timeline.loads[i] = l
		return nil
	}
	return fmt.Errorf("there is no load %q", f.Load)
}

func (s *Sim) moveSupport(f Fault, at float64) error {
	i := slices.Index(s.supports, f.Support)
	if i < 0 {
		return fmt.Errorf("there is no support %q", f.Support)
	}
	s.timeline.shifts = append(s.timeline.shifts, shift{support: i, from: at, to: at + 1, by: float64(f.Size)})
	return nil
}

// layLine lays a fault of a port or of one gauge's frames out.
func (s *Sim) layLine(f Fault, e *effect) error {
	port := -1
	for i, p := range s.ports {
		if p.Name == f.Port || f.Port == "" && slices.Contains(p.Gauges, f.Gauge) {
			port = i
		}
	}
	if port < 0 {
		return fmt.Errorf("there is no port %q or gauge %q", f.Port, f.Gauge)
	}
	if f.Port == "" {
		e.gauge = s.gauges[slices.IndexFunc(s.gauges, func(g *instrument) bool { return g.name == f.Gauge })]
	}
	e.truth.Gauges = s.ports[port].Gauges
	if f.Kind == Unplug {
		name := f.Name
		if name == "" {
			name = s.ports[port].Name
		}
		s.events = append(s.events, dueEvent{e.from, Event{Kind: Unplugged, Port: s.ports[port].Name}})
		if e.to < s.end {
			s.events = append(s.events, dueEvent{e.to, Event{Kind: Plugged, Port: s.ports[port].Name, Name: name}})
		}
		return nil
	}
	s.lines[port].touch = append(s.lines[port].touch, e)
	return nil
}

// layPress lays out the presses of a gauge's button.
func (s *Sim) layPress(f Fault, e *effect) error {
	i := slices.IndexFunc(s.gauges, func(g *instrument) bool { return g.name == f.Gauge })
	if i < 0 {
		return fmt.Errorf("there is no gauge %q", f.Gauge)
	}
	g := s.gauges[i]
	if !g.button {
		return fmt.Errorf("%s has no button to send with: its frame does not say button: true", f.Gauge)
	}
	at, every := e.from, nanoseconds(float64(f.Every))
	g.presses = append(g.presses, at)
	for every > 0 && at+every < min(e.to, s.end) {
		at += every
		g.presses = append(g.presses, at)
	}
	slices.Sort(g.presses)
	e.to = at + 1
	g.effects = append(g.effects, e)
	e.gauge, e.truth.Gauges = g, []string{g.name}
	return nil
}

// settle works out which effects on a gauge are in force at an instant.
func (s *Sim) settle(g *instrument, at int64) {
	st := gaugeState{unit: g.gauge.unit, low: g.gauge.low, high: g.gauge.high, zero: g.state.zero}
	g.change = forever
	g.live = g.live[:0]
	for _, e := range g.effects {
		for _, t := range []int64{e.from, e.to} {
			if t > at {
				g.change = min(g.change, t)
			}
		}
		if e.from > at {
			continue
		}
		in := at < e.to
		if in {
			g.live = append(g.live, e)
		}
		switch e.kind {
		case GaugeKnock, StandKnock:
			st.shift += e.size
		case ZeroPressed:
			if e.truth.MM == 0 {
				g.state.shift = st.shift
				was := s.indication(g, float64(e.from)/1e9, 0)
				st.zero -= was
				e.truth.MM = -g.gauge.sense * was
			}
		}
		if !in {
			continue
		}
		switch e.kind {
		case Spike:
			st.shift += e.size
		case UnitKey:
			st.unit = map[string]string{"mm": "in", "in": "mm"}[st.unit]
		case Freeze:
			st.frozen = true
		case Hold:
			st.frozen, st.status = true, "hold"
		case ShowStatus:
			st.status = e.truth.Fault.Status
		case EndOfTravel:
			if g.gauge.offset+g.gauge.gain*g.gauge.preset <= e.limit {
				st.high = math.Min(st.high, e.limit)
			} else {
				st.low = math.Max(st.low, e.limit)
			}
		case BatteryLow:
			st.status = "battery-low"
		case OverRange:
			st.none = "over-range"
		}
	}
	if !g.encoder.Says(st.status) {
		st.status = ""
	}
	g.state = st
}
