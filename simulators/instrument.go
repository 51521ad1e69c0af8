package simulators

import (
	"math"
	"math/rand/v2"

	"gaugelog/simulators/wire"
)

// instrument is a gauge or a probe at work.
type instrument struct {
	sim     *Sim
	name    string
	frame   string // of the rig file
	channel string
	// elsewhere is true where another rig speaks for it (Join).
	elsewhere bool
	place     int // in the rig, for ties
	port      int
	encoder   wire.Encoder
	random    *rand.Rand
	value     wire.Value
	// showedMM is what the value is in mm (a probe: degree Celsius).
	showedMM float64

	// When it sends.
	due, base int64
	phase     float64 // 0..1 of its interval
	clock     float64 // its interval / the stated one
	jitter    float64 // s
	least     int64   // ns, of a gauge that is asked
	paces     []pace
	late      bool  // the frame due has been delayed already
	overdue   bool  // beyond the time anyone waits for it
	timeout   int64 // ns that one waits for an answer
	button    bool
	calls     bool    // a Modbus slave
	talks     bool    // understands lines
	presses   []int64 // still to come, in order
	ends      int     // bytes of the frame's terminator

	probe *probeTruth
	gauge gaugeTruth

	effects []*effect
	live    []*effect // in force now
	change  int64     // when the set of effects in force next changes
	counts  Counts
	state   gaugeState
}

// gaugeTruth is what a gauge does with the beam's movement.
type gaugeTruth struct {
	curve              int
	piece              int // last used of the grid
	sense              float64
	preset, offset     float64
	gain, noise, drift float64
	resolution, inches float64
	low, high          float64
	unit               string
	bothUnits          bool // its frames say mm or in
	climate            []climate
	climateAtStart     float64
	onBeam             bool
	rings              []ring
	ring               int // the last one begun
}

// gaugeState is what the faults have made of a gauge at this instant.
type gaugeState struct {
	shift, zero float64
	frozen      bool
	unit        string
	low, high   float64
	status      string
	none        string
}

// ring is the beam's ringing after a change of load.
type ring struct {
	from      float64 // s
	amplitude float64 // mm
}

// askedFor tells whether the instrument waits for a request.
func (g *instrument) askedFor() bool { return g.encoder.Request() != nil }

// begin sets the first frame's instant.
func (g *instrument) begin(paces []pace) {
	g.paces = paces
	g.base = int64(g.phase * float64(g.interval(0)))
	g.due = g.base + int64(g.jitter*g.random.Float64()*1e9)
	if g.button {
		g.due = g.nextPress()
	}
	g.change = 0
	g.state = gaugeState{unit: g.gauge.unit, low: g.gauge.low, high: g.gauge.high}
}

// interval is the time between frames at an instant, in ns.
func (g *instrument) interval(at int64) int64 {
	every := int64(1e9)
	for _, p := range g.paces {
		if p.from <= at {
			every = p.every
		}
	}
	return max(every, g.least)
}

// advance sets the next frame's instant. Where the pace changes before it, it
// starts anew in step with the new pace.
func (g *instrument) advance() {
	g.late, g.overdue = false, false
	if g.button {
		g.due = g.nextPress()
		return
	}
	next := g.base + int64(float64(g.interval(g.base))*g.clock)
	for _, p := range g.paces {
		if p.from > g.base && p.from <= next {
			next = p.from + int64(g.phase*float64(max(p.every, g.least)))
			break
		}
	}
	g.base = next
	g.due = next + int64(g.jitter*g.random.Float64()*1e9)
}

// nextPress takes the next press of the button.
func (g *instrument) nextPress() int64 {
	if len(g.presses) == 0 {
		return forever
	}
	at := g.presses[0]
	g.presses = g.presses[1:]
	return at
}

// delayed puts a frame off once where replies are late, and says that it did.
func (g *instrument) delayed(l *line, at int64) bool {
	if g.late {
		return false
	}
	for _, e := range l.touch {
		if e.kind == LateReply && e.on(at, g) {
			e.truth.Frames++
			g.late, g.overdue = true, g.timeout > 0 && e.delay >= g.timeout
			g.due += e.delay
			return true
		}
	}
	return false
}

// show works out what the instrument shows at an instant.
func (s *Sim) show(g *instrument, at int64) {
	if at >= g.change {
		s.settle(g, at)
	}
	t := float64(at) / 1e9
	if g.probe != nil {
		g.value.Celsius = g.probe.temperature.at(t) + g.probe.noiseTemperature*g.random.NormFloat64()
		g.value.Percent = min(100, max(0, g.probe.humidity.at(t)+g.probe.noiseHumidity*g.random.NormFloat64()))
		g.value.Status, g.value.NoReading, g.showedMM = g.state.status, g.state.none, g.value.Celsius
		return
	}
	noise := g.gauge.noise * g.random.NormFloat64()
	g.value.Status, g.value.NoReading = g.state.status, g.state.none
	if g.state.frozen {
		return
	}
	shown := s.indication(g, t, noise)
	g.value.Unit = g.state.unit
	if g.state.unit == "in" {
		g.value.Shown = math.Round(shown/25.4/g.gauge.inches) * g.gauge.inches
		g.showedMM = g.value.Shown * 25.4
		return
	}
	g.value.Shown = math.Round(shown/g.gauge.resolution) * g.gauge.resolution
	g.showedMM = g.value.Shown
}

// indication is what the gauge measures before it rounds.
func (s *Sim) indication(g *instrument, t, noise float64) float64 {
	d := &g.gauge
	moved := g.state.shift + d.drift*t/86400
	if d.curve >= 0 {
		d.piece = s.response.grid.find(t, d.piece)
		moved += s.response.curves[d.curve].at(s.response.grid, d.piece, t)
		moved += s.ringing(d, t)
	}
	if len(d.climate) > 0 {
		moved += d.surroundings(t) - d.climateAtStart
	}
	if d.onBeam && t >= s.breakAt {
		moved += 1000
	}
	raw := d.offset + d.gain*(d.preset+d.sense*moved) + noise
	return min(g.state.high, max(g.state.low, raw)) + g.state.zero
}

// ringing is the beam's swinging after the last change of load.
func (s *Sim) ringing(d *gaugeTruth, t float64) float64 {
	for d.ring+1 < len(d.rings) && t >= d.rings[d.ring+1].from {
		d.ring++
	}
	for d.ring > 0 && t < d.rings[d.ring].from {
		d.ring--
	}
	if d.ring >= len(d.rings) {
		return 0
	}
	p, since := s.truth.Place, t-d.rings[d.ring].from
	if since < 0 || since > 20*float64(p.Decay) {
		return 0
	}
	return d.rings[d.ring].amplitude * math.Exp(-since/float64(p.Decay)) * math.Cos(2*math.Pi*p.Hertz*since)
}
