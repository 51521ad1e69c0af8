package simulators

import (
	"errors"
	"fmt"
	"slices"
)

// Source is what sends bytes on ports: a [Sim], or several in a [Joint].
type Source interface {
	// Next gives what happens up to an instant, as [Sim.Next] does.
	Next(until int64, most int) *Stretch
	// Ask answers requests, as [Sim.Ask] does.
	Ask(port int, heard []byte, at int64) Batch
	// Due is the instant of the next frame or event.
	Due() int64
	// Ports lists the ports; [Batch.Index] counts in it.
	Ports() []Port
	// End is the length of the test in nanoseconds.
	End() int64
}

// Joint is several simulated rigs on one computer. Rigs may share ports: the
// gauges of both then speak on the one line, as on a bus or behind a
// multiplexer. A probe that two rigs have in common, which has the same name,
// port, frame and channel in both, is one instrument and speaks once.
//
// Events tell whose they are by [Event.Rig]. It is not safe for use by several
// goroutines, and its Sims must not be asked for bytes by themselves.
type Joint struct {
	sims    []*Sim
	ports   []Port
	lines   []*line
	stretch Stretch
}

// Join puts rigs together, which must begin at the same instant and have the
// same power cuts, as they are recorded by one computer. No two gauges may
// have one name, or nobody could tell their frames apart.
func Join(sims ...*Sim) (*Joint, error) {
	if len(sims) == 0 {
		return nil, errors.New("there are no rigs to join")
	}
	j := &Joint{sims: sims}
	for rig, s := range sims {
		if s.start != sims[0].start || !slices.Equal(s.cuts, sims[0].cuts) || s.asked != sims[0].asked {
			return nil, errors.New("rigs on one computer begin at one instant, are asked or not alike and lose their power together: give them the same start and power cuts")
		}
		for i := range s.events {
			s.events[i].event.Rig = rig
		}
		if rig > 0 {
			s.dropPower()
		}
		if err := j.add(rig, s); err != nil {
			return nil, err
		}
	}
	return j, nil
}

// dropPower leaves the power cuts to the first rig to tell of.
func (s *Sim) dropPower() {
	s.events = slices.DeleteFunc(s.events, func(e dueEvent) bool { return e.event.Kind == PowerCut || e.event.Kind == PowerBack })
}

// add joins one rig's lines and instruments to those before it.
func (j *Joint) add(rig int, s *Sim) error {
	place := make([]int, len(s.ports))
	for i := range s.ports {
		at := slices.IndexFunc(j.ports, func(p Port) bool { return p.Name == s.ports[i].Name })
		if at < 0 {
			at = len(j.ports)
			p := s.ports[i]
			p.Gauges = nil
			j.ports, j.lines = append(j.ports, p), append(j.lines, s.lines[i])
			s.lines[i].batch.Index = at
		} else if j.ports[at].Line != s.ports[i].Line {
			return fmt.Errorf("port %s has one line setting in one rig and another in the next", s.ports[i].Name)
		}
		place[i] = at
		if l := j.lines[at]; l != s.lines[i] {
			l.touch = append(l.touch, s.lines[i].touch...)
			s.lines[i] = l
		}
	}
	for _, g := range s.gauges {
		port := &j.ports[place[g.port]]
		if !slices.Contains(port.Gauges, g.name) {
			if j.find(rig, g.name) != nil {
				return fmt.Errorf("two rigs have a gauge %q on different ports", g.name)
			}
			port.Gauges = append(port.Gauges, g.name)
			continue
		}
		if same := j.find(rig, g.name); same.probe == nil || g.probe == nil || same.frame != g.frame || same.channel != g.channel {
			return fmt.Errorf("two rigs have a gauge %q on port %s", g.name, port.Name)
		}
		s.quiet(g)
	}
	return nil
}

// find finds an instrument of the rigs before the given one.
func (j *Joint) find(before int, name string) *instrument {
	for _, s := range j.sims[:before] {
		for _, g := range s.gauges {
			if g.name == name {
				return g
			}
		}
	}
	return nil
}

// quiet takes an instrument out that another rig speaks for.
func (s *Sim) quiet(g *instrument) {
	g.elsewhere = true
	var rest queue
	for _, one := range s.queue {
		if one != g {
			rest.push(one)
		}
	}
	s.queue = rest
}

// Sims lists the rigs.
func (j *Joint) Sims() []*Sim { return j.sims }

// Ports lists the ports of all rigs, each once.
func (j *Joint) Ports() []Port { return j.ports }

// End is the end of the rig that lasts longest. The others are silent from
// their own end on.
func (j *Joint) End() int64 {
	end := int64(0)
	for _, s := range j.sims {
		end = max(end, s.end)
	}
	return end
}

// Due is the instant of the next frame or event, in nanoseconds from the
// start, or End.
func (j *Joint) Due() int64 {
	due := j.End()
	for _, s := range j.sims {
		if at := s.Due(); at < s.end {
			due = min(due, at)
		}
	}
	return due
}

// Next gives what happens up to until on all rigs, as [Sim.Next] does for one.
func (j *Joint) Next(until int64, most int) *Stretch {
	until = min(until, j.End())
	for _, l := range j.lines {
		l.clear()
	}
	j.stretch.Events = j.stretch.Events[:0]
	for {
		var first *Sim
		for _, s := range j.sims {
			if due := s.Due(); due < min(until, s.end) && (first == nil || due < first.Due()) {
				first = s
			}
		}
		if first == nil {
			return j.hand(until)
		}
		first.stretch.Events = first.stretch.Events[:0]
		if st := first.proceed(min(until, first.end), most); st != nil {
			j.stretch.Events = append(j.stretch.Events, st.Events...)
			return j.hand(st.Reached)
		}
	}
}

// hand gives the stretch out.
func (j *Joint) hand(reached int64) *Stretch {
	st := &j.stretch
	st.Batches = st.Batches[:0]
	for _, l := range j.lines {
		if len(l.batch.Frames) > 0 || len(l.batch.Bytes) > 0 {
			st.Batches = append(st.Batches, l.batch)
		}
	}
	st.Reached, st.At, st.Done = reached, j.sims[0].Instant(reached), reached >= j.End()
	return st
}

// Ask answers requests heard on a port with the instruments of all rigs on it,
// as [Sim.Ask] does for one.
func (j *Joint) Ask(port int, heard []byte, at int64) Batch {
	l := j.lines[port]
	l.clear()
	l.heard = append(l.heard, heard...)
	for answered := true; answered; {
		answered = false
		var on []*instrument
		for _, s := range j.sims {
			on = append(on, s.on(l, at)...)
		}
		answered = l.answer(on, at)
	}
	l.trim()
	return l.batch
}

// Counts lists the frames of every instrument, rig by rig; a shared probe's
// stand with the first rig that has it.
func (j *Joint) Counts() []Counts {
	var out []Counts
	for _, s := range j.sims {
		for i, c := range s.Counts() {
			if !s.gauges[i].elsewhere {
				out = append(out, c)
			}
		}
	}
	return out
}
