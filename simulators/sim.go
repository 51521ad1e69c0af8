package simulators

import (
	"fmt"
	"hash/fnv"
	"io"
	"math/rand/v2"
	"slices"
	"time"

	"gaugelog/config"
)

// Options say what to simulate.
type Options struct {
	Rig   *config.Rig
	Truth *Truth
	// Faults may be nil.
	Faults *Faults
	// Seed fixes noise, jitter and phases.
	Seed uint64
	// Start is the first instant; where Wall is 0, the truth's start with a
	// computer that was started 90 s before.
	Start Instant
	// Asked makes gauges that have a request wait for it ([Sim.Ask]), as real
	// ones do. Without it they send their answers by themselves, as though
	// asked at their interval, which is what a conductor of virtual time wants.
	Asked bool
	// Beyond lets the gauges go on for so long after the plan's end, under
	// its last loads, as a recording does; real time wants this long.
	Beyond time.Duration
	// Frames, if set, gets one JSON line for every frame sent: its gauge,
	// instant, value in mm and state. What goes wrong in writing is told by
	// [Sim.WriteTruth].
	Frames io.Writer
}

// Port is one simulated serial port.
type Port struct {
	Name   string   // the rig file's port, or sim:NAME where it gives none
	Gauges []string // the gauges and probes on it, in the rig's order
	Line   config.Line
}

// Sim is a simulated rig. It is not safe for use by several goroutines.
type Sim struct {
	start    Instant
	asked    bool
	ports    []Port
	lines    []*line       // one may be shared with another Sim (Join)
	gauges   []*instrument // in the rig's order, gauges before probes
	queue    queue
	events   []dueEvent // sorted by time; what is left
	cuts     []Interval
	boots    []boot
	timeline *timeline
	response *response
	beam     *beam
	truth    *Truth
	gravity  float64
	log      []*FaultTruth
	views    map[string]int // of net sags
	stands   []string       // of each instrument; empty for none
	supports []string
	breakAt  float64 // s; infinite
	turn     int64   // ns an asked gauge takes to answer
	end      int64
	stretch  Stretch
	frames   *frameLog // nil: not wanted
}

// boot is one life of the recorder's computer.
type boot struct {
	id   string
	from int64
	base int64 // boot clock at from
}

type dueEvent struct {
	at    int64
	event Event
}

const bootLead = 90e9 // ns between a computer's start and the recorder's

// New builds the simulation: it checks the truth and the faults against the
// rig, works the physics out and lays the schedule. Errors name what does not
// fit.
func New(o Options) (*Sim, error) {
	if o.Rig == nil || o.Truth == nil {
		return nil, fmt.Errorf("the simulator needs a rig and a truth")
	}
	s := &Sim{truth: o.Truth, asked: o.Asked, gravity: o.Truth.gravity(o.Rig.Gravity), start: o.Start}
	if s.start.Wall == 0 {
		at := o.Truth.Start
		if at == "" {
			at = "2026-03-02T08:00:00Z"
		}
		begin, err := time.Parse(time.RFC3339, at)
		if err != nil {
			return nil, fmt.Errorf("%s: start %q is no RFC 3339 time, such as 2026-03-02T08:00:00Z", o.Truth.name, at)
		}
		s.start = Instant{Wall: begin.UnixNano(), Boot: bootLead}
	}
	var err error
	if s.timeline, err = newTimeline(o.Rig, o.Truth, s.gravity); err != nil {
		return nil, err
	}
	if o.Frames != nil {
		s.frames = &frameLog{to: o.Frames, start: s.start.Wall}
	}
	s.timeline.extend(o.Beyond.Seconds())
	s.end = nanoseconds(s.timeline.end)
	s.turn = 5e6
	if d := o.Truth.Lines.Delay; d > 0 {
		s.turn = nanoseconds(float64(d))
	}
	if s.beam, err = newBeam(o.Rig, o.Truth); err != nil {
		return nil, err
	}
	faults := o.Faults
	if faults == nil {
		faults = &Faults{}
	}
	if err := s.build(o, faults); err != nil {
		return nil, err
	}
	return s, nil
}

// build makes the instruments, the faults and the schedule, in this order:
// faults may change loads, which the response then contains.
func (s *Sim) build(o Options, faults *Faults) error {
	if err := s.instruments(o.Rig, o.Truth, o.Seed); err != nil {
		return err
	}
	seed := o.Seed
	if faults.Seed != nil {
		seed = *faults.Seed
	}
	if err := s.schedule(faults, seed); err != nil {
		return err
	}
	if err := s.respond(o.Rig, o.Truth); err != nil {
		return err
	}
	marks := 0
	for _, st := range s.timeline.steps {
		if st.Marked >= 0 && st.Marked < s.end {
			marks++
			m := &Mark{ID: fmt.Sprintf("m%d", marks), Step: st.Step, Loads: st.values}
			s.events = append(s.events, dueEvent{st.Marked, Event{Kind: MarkDue, Mark: m}})
		}
	}
	slices.SortStableFunc(s.events, func(a, b dueEvent) int { return int(min(1, max(-1, a.at-b.at))) })
	s.boot(o.Seed)
	for i := range s.events {
		e := &s.events[i]
		e.event.At = s.Instant(e.at)
		if e.event.Mark != nil {
			e.event.Mark.At = e.event.At
		}
		if e.event.Kind == PowerBack {
			e.event.Boot = s.BootID(e.at)
		}
	}
	paces, err := newPaces(o.Truth, s.timeline)
	if err != nil {
		return err
	}
	for _, g := range s.gauges {
		g.begin(paces)
		s.enqueue(g)
	}
	return nil
}

// boot lays down the lives of the computer: a new one after each power cut.
func (s *Sim) boot(seed uint64) {
	s.boots = []boot{{id: bootID(seed, 0), from: 0, base: s.start.Boot}}
	for i, c := range s.cuts {
		s.boots = append(s.boots, boot{id: bootID(seed, i+1), from: c.To, base: bootLead})
	}
}

func bootID(seed uint64, n int) string {
	r := rand.New(rand.NewPCG(seed, uint64(n)+0x626f6f74))
	return fmt.Sprintf("%016x%016x", r.Uint64(), r.Uint64())
}

// BootID is the boot id that holds at an instant, in nanoseconds from the
// start: 32 hexadecimal digits, from the seed.
func (s *Sim) BootID(at int64) string { return s.boots[s.life(at)].id }

func (s *Sim) life(at int64) int {
	i := len(s.boots) - 1
	for i > 0 && at < s.boots[i].from {
		i--
	}
	return i
}

// Instant turns nanoseconds from the start into the recorder's two clocks.
func (s *Sim) Instant(at int64) Instant {
	b := &s.boots[s.life(at)]
	return Instant{Wall: s.start.Wall + at, Boot: b.base + at - b.from}
}

// Ports lists the ports in the rig's order, gauges before probes.
func (s *Sim) Ports() []Port { return s.ports }

// End is the length of the test in nanoseconds.
func (s *Sim) End() int64 { return s.end }

// Cuts lists the power cuts of the recorder.
func (s *Sim) Cuts() []Interval { return s.cuts }

// Gravity is the true one, in m/s2.
func (s *Sim) Gravity() float64 { return s.gravity }

// stream is a random stream of its own for a name.
func stream(seed uint64, name string) *rand.Rand {
	h := fnv.New64a()
	h.Write([]byte(name))
	return rand.New(rand.NewPCG(seed, h.Sum64()))
}
