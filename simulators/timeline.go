package simulators

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gaugelog/config"
	"gaugelog/simulators/statics"
)

// change is an even growth of a force by by newtons from from to to (s).
type change struct{ from, to, by float64 }

// pusher is something that pushes on the beam: a load, or a plunger whose
// friction turns. Its force is zero at the start.
type pusher struct {
	name    string
	where   statics.Load
	changes []change
}

// force is the pusher's force at t.
func (p *pusher) force(t float64) float64 {
	sum := 0.0
	for _, c := range p.changes {
		sum += c.by * rampShare(t, c.from, c.to)
	}
	return sum
}

func rampShare(t, from, to float64) float64 {
	switch {
	case t <= from:
		return 0
	case t >= to:
		return 1
	}
	return (t - from) / (to - from)
}

// StepTruth is when a planned step really began and what it then bore.
type StepTruth struct {
	Step string
	// From is the first movement, Full the instant the change was complete,
	// To the next step's From (or the end); nanoseconds from the start.
	From, Full, To int64
	// Marked is the instant typed, in nanoseconds from the start; negative
	// where the step was not marked.
	Marked int64
	// Loads is the true force of each load in N, with lever and tare, in the
	// rig's order.
	Loads []LoadForce
	// values are what the mark says.
	values []LoadValue
}

// LoadForce is a load's true force on the beam in N.
type LoadForce struct {
	Name   string
	Newton float64
}

// timeline is the plan as it really happens.
type timeline struct {
	steps  []StepTruth
	end    float64 // s
	loads  []*pusher
	shifts []shift // of supports
}

// shift is a support's own movement.
type shift struct {
	support      int
	from, to, by float64
}

const leastRamp = 0.05 // s; nothing is placed in no time

// newTimeline works out when the plan's steps really happen and what each load
// does.
func newTimeline(rig *config.Rig, truth *Truth, g float64) (*timeline, error) {
	if len(rig.Plan) == 0 {
		return nil, errors.New("the rig file has no plan: the simulator needs one to know what is hung when")
	}
	tl := &timeline{}
	late := map[string]TruthStep{}
	for _, s := range truth.Steps {
		if !slices.ContainsFunc(rig.Plan, func(p config.PlanStep) bool { return p.Step == s.Step }) {
			return nil, fmt.Errorf("the truth's step %q is not in the rig's plan", s.Step)
		}
		late[s.Step] = s
	}
	real := make([]realLoad, len(rig.Loads))
	for i, l := range rig.Loads {
		r, err := newRealLoad(l, truth, g)
		if err != nil {
			return nil, err
		}
		real[i] = r
		tl.loads = append(tl.loads, &pusher{name: l.Name, where: r.where})
	}
	at := 0.0
	for i, p := range rig.Plan {
		if err := tl.add(i, p, late[p.Step], at, real, truth.Place.Takes); err != nil {
			return nil, err
		}
		at += p.Hold.Value
	}
	tl.end = at
	for i := range tl.steps {
		tl.steps[i].To = nanoseconds(at)
		if i+1 < len(tl.steps) {
			tl.steps[i].To = tl.steps[i+1].From
		}
		if tl.steps[i].To < tl.steps[i].Full {
			return nil, fmt.Errorf("step %q ends before its load is placed: give it a longer hold", tl.steps[i].Step)
		}
	}
	return tl, tl.settle(rig, truth)
}

// add appends one planned step that begins at at (s).
func (tl *timeline) add(i int, p config.PlanStep, late TruthStep, at float64, real []realLoad, takes Seconds) error {
	if late.Takes > 0 {
		takes = late.Takes
	} else if takes == 0 {
		takes = 2
	}
	from := at + float64(late.Late)
	to := from + max(leastRamp, float64(takes))
	step := StepTruth{Step: p.Step, From: nanoseconds(from), Full: nanoseconds(to), Marked: -1}
	if i == 0 {
		step.From, step.Full = 0, 0
	} else if len(p.Set) == 0 {
		step.Full = step.From
	}
	for _, set := range p.Set {
		j := slices.IndexFunc(tl.loads, func(l *pusher) bool { return l.name == set.Load })
		if j < 0 {
			return fmt.Errorf("the plan's step %q sets a load %q that the rig does not have", p.Step, set.Load)
		}
		value := real[j].value(set)
		step.values = append(step.values, value)
		before := real[j].newton
		real[j].hang(value)
		if by := real[j].newton - before; by != 0 && i > 0 {
			tl.loads[j].changes = append(tl.loads[j].changes, change{from: from, to: to, by: by})
		}
	}
	if len(p.Set) > 0 && !late.Unmarked {
		step.Marked = max(0, step.Full+nanoseconds(float64(late.MarkLate)))
	}
	for j := range real {
		step.Loads = append(step.Loads, LoadForce{Name: tl.loads[j].name, Newton: real[j].newton})
	}
	tl.steps = append(tl.steps, step)
	return nil
}

// extend lets the last step go on by so many seconds.
func (tl *timeline) extend(by float64) {
	if by > 0 {
		tl.end += by
		tl.steps[len(tl.steps)-1].To = nanoseconds(tl.end)
	}
}

// settle collects the supports' own movements.
func (tl *timeline) settle(rig *config.Rig, truth *Truth) error {
	for _, s := range truth.Supports {
		i := slices.IndexFunc(rig.Supports, func(r config.Support) bool { return r.Name == s.Name })
		if i < 0 {
			return fmt.Errorf("the truth's support %q is not in the rig file", s.Name)
		}
		for _, m := range s.Settlement {
			from, err := tl.instant(m.At, m.After)
			if err != nil {
				return err
			}
			over := float64(m.Over)
			if over == 0 {
				over = 1
			}
			tl.shifts = append(tl.shifts, shift{support: i, from: from, to: from + max(leastRamp, over), by: float64(m.By)})
		}
	}
	return nil
}

// instant gives a time in s from the start: at alone, or counted from the full
// load of a step.
func (tl *timeline) instant(at Seconds, after string) (float64, error) {
	if after == "" {
		return float64(at), nil
	}
	for _, s := range tl.steps {
		if s.Step == after {
			return float64(s.Full)/1e9 + float64(at), nil
		}
	}
	return 0, fmt.Errorf("after: there is no step %q in the plan", after)
}

// moments are all instants at which some force or support begins or ceases to
// move, sorted, in s.
func (tl *timeline) moments() []float64 {
	var out []float64
	for _, l := range tl.loads {
		for _, c := range l.changes {
			out = append(out, c.from, c.to)
		}
	}
	for _, s := range tl.shifts {
		out = append(out, s.from, s.to)
	}
	return sortedUnique(out)
}

func sortedUnique(x []float64) []float64 {
	slices.Sort(x)
	return slices.Compact(x)
}

// realLoad is a load as it really hangs.
type realLoad struct {
	where  statics.Load
	factor float64 // lever and the truth's factor
	tare   float64 // kg
	g      float64
	newton float64
}

func newRealLoad(l config.Load, truth *Truth, g float64) (realLoad, error) {
	r := realLoad{factor: 1, g: g}
	switch {
	case l.At != nil:
		r.where = statics.Load{From: l.At.Value, To: l.At.Value}
	case l.From != nil && l.To != nil:
		r.where = statics.Load{From: l.From.Value, To: l.To.Value}
	default:
		return r, fmt.Errorf("load %q has no place: at, or from and to", l.Name)
	}
	if l.Lever != nil {
		r.factor = l.Lever.Value
	}
	if l.Tare != nil {
		r.tare = l.Tare.Value
	}
	for _, t := range truth.Loads {
		if t.Name == l.Name {
			if t.Factor != nil {
				r.factor *= *t.Factor
			}
			r.where.From += float64(t.Off)
			r.where.To += float64(t.Off)
		}
	}
	return r, nil
}

// value is what the operator types for a planned setting.
func (r *realLoad) value(set config.SetWeight) LoadValue {
	v := LoadValue{Name: set.Load, Shown: set.Weight.Shown}
	if set.Weight.Mass != nil {
		v.Kilogram = set.Weight.Mass.Value
		v.Newton = v.Kilogram * r.g
	} else if set.Weight.Force != nil {
		v.Newton, v.IsForce = set.Weight.Force.Value, true
	}
	return v
}

// hang sets the true force for a value typed.
func (r *realLoad) hang(v LoadValue) {
	r.newton = v.Newton * r.factor
	if v.Newton != 0 {
		r.newton += r.tare * r.g * r.factor
	}
}

func nanoseconds(s float64) int64 { return int64(math.Round(s * 1e9)) }
