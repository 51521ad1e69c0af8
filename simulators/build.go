package simulators

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gaugelog/config"
	"gaugelog/simulators/statics"
	"gaugelog/simulators/wire"
)

var errPaceOrder = errors.New("the truth's paces must stand in order of time")

// newBeam takes the supports from the rig and everything else from the truth.
func newBeam(rig *config.Rig, truth *Truth) (*beam, error) {
	var supports []statics.Support
	b := &beam{}
	for _, s := range rig.Supports {
		supports = append(supports, statics.Support{At: s.At.Value, Clamp: s.Kind == "clamp"})
		compliance, crushing := 0.0, 0.0
		for _, t := range truth.Supports {
			if t.Name == s.Name {
				compliance, crushing = float64(t.Compliance), float64(t.Crushing)
			}
		}
		b.compliance, b.crushing = append(b.compliance, compliance), append(b.crushing, crushing)
	}
	var err error
	if b.layout, err = statics.New(supports); err != nil {
		return nil, err
	}
	if b.bending, b.shear, err = truth.Specimen.stiffness(rig.Specimen.Section); err != nil {
		return nil, err
	}
	b.law, err = truth.Creep.law()
	return b, err
}

// instruments makes gauges and probes and the ports they share.
func (s *Sim) instruments(rig *config.Rig, truth *Truth, seed uint64) error {
	for _, t := range truth.Gauges {
		if !slices.ContainsFunc(rig.Gauges, func(g config.Gauge) bool { return g.Name == t.Name }) {
			return fmt.Errorf("the truth's gauge %q is not in the rig file", t.Name)
		}
	}
	for i := range rig.Gauges {
		c := &rig.Gauges[i]
		t := truth.gauge(c.Name)
		g, err := s.instrument(rig, truth, seed, c.Name, c.Port, c.Frame, c.Line, wire.Instrument{
			Channel: c.Channel, Resolution: c.Resolution.Value, InchResolution: inches(t, c.Resolution.Value),
		})
		if err != nil {
			return err
		}
		g.gauge = newGaugeTruth(c, t, truth)
		g.gauge.speak(g.encoder, s.frame(rig, c.Frame).Unit)
		g.value.Unit = g.gauge.unit
		s.stands = append(s.stands, c.Stand)
	}
	for i := range rig.Probes {
		c := &rig.Probes[i]
		g, err := s.instrument(rig, truth, seed, c.Name, c.Port, c.Frame, c.Line, wire.Instrument{
			Channel: c.Channel, Resolution: 0.01, InchResolution: 0.01, Temperature: c.Temperature, Humidity: c.Humidity,
		})
		if err != nil {
			return err
		}
		s.stands = append(s.stands, "")
		g.probe = &probeTruth{
			temperature: truth.Room.Temperature.swing(), humidity: truth.Room.Humidity.swing(),
			noiseTemperature: truth.Room.NoiseTemperature, noiseHumidity: truth.Room.NoiseHumidity,
		}
	}
	for _, p := range rig.Supports {
		s.supports = append(s.supports, p.Name)
	}
	if len(s.gauges) == 0 {
		return errors.New("the rig has no gauges to simulate")
	}
	return nil
}

// frame finds a frame's description; nil where the rig has none of the name.
func (s *Sim) frame(rig *config.Rig, name string) *config.Frame {
	for i := range rig.Frames {
		if rig.Frames[i].Name == name {
			return &rig.Frames[i]
		}
	}
	return nil
}

// speak makes the gauge show what its frames can say: steps no finer than
// theirs, and their unit where they name none.
func (d *gaugeTruth) speak(e wire.Encoder, unit string) {
	coarser := func(resolution *float64, step float64) {
		// A ratio that is whole but for rounding leaves the resolution as it is.
		if ratio := *resolution / step; step > 0 && (ratio < 0.5 || math.Abs(ratio-math.Round(ratio)) > 1e-6) {
			*resolution = step * math.Max(1, math.Round(*resolution/step))
		}
	}
	coarser(&d.resolution, e.Step("mm"))
	coarser(&d.inches, e.Step("in"))
	d.bothUnits = e.SaysUnit()
	if !d.bothUnits && unit != "" {
		d.unit = unit
	}
}

// instrument makes one instrument, with its encoder and its port.
func (s *Sim) instrument(rig *config.Rig, truth *Truth, seed uint64, name, port, frame string, own *config.Line, what wire.Instrument) (*instrument, error) {
	f := s.frame(rig, frame)
	if f == nil {
		return nil, fmt.Errorf("%s: the rig file describes no frame %q; the simulator needs to know what to send", name, frame)
	}
	encoder, err := wire.New(f, what)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	line := f.Line
	if own != nil {
		line = *own
	}
	g := &instrument{sim: s, name: name, frame: frame, channel: what.Channel, place: len(s.gauges), encoder: encoder, random: stream(seed, name), clock: 1}
	g.port = s.port(portName(port, name), name, line)
	g.phase = g.random.Float64()
	g.jitter = 0.002
	if truth.Lines.Jitter > 0 {
		g.jitter = float64(truth.Lines.Jitter)
	}
	clocks := truth.Lines.Clocks
	if clocks == 0 {
		clocks = 30
	}
	g.clock = 1 + clocks*1e-6*(2*g.random.Float64()-1)
	if f.Every != nil {
		g.least = nanoseconds(f.Every.Value)
	}
	if f.Timeout != nil {
		g.timeout = nanoseconds(f.Timeout.Value)
	}
	g.button, g.counts.Name, g.value.Unit = f.Button, name, "mm"
	g.ends = g.encoder.Ends()
	_, g.calls = g.encoder.(wire.Registers)
	_, g.talks = g.encoder.(wire.Talker)
	s.gauges = append(s.gauges, g)
	return g, nil
}

// port finds or makes a port.
func (s *Sim) port(name, gauge string, line_ config.Line) int {
	for i := range s.ports {
		if s.ports[i].Name == name {
			s.ports[i].Gauges = append(s.ports[i].Gauges, gauge)
			return i
		}
	}
	s.ports = append(s.ports, Port{Name: name, Gauges: []string{gauge}, Line: line_})
	s.lines = append(s.lines, &line{batch: Batch{Port: name, Index: len(s.lines)}})
	return len(s.ports) - 1
}

// gauge is the truth of one gauge: its own entry over that for every gauge.
func (t *Truth) gauge(name string) TruthGauge {
	out := t.Every
	out.Name = name
	for _, g := range t.Gauges {
		if g.Name != name {
			continue
		}
		out.merge(g)
	}
	return out
}

func (t *TruthGauge) merge(g TruthGauge) {
	over(&t.Preset, g.Preset)
	over(&t.Offset, g.Offset)
	over(&t.Gain, g.Gain)
	over(&t.Noise, g.Noise)
	over(&t.Drift, g.Drift)
	over(&t.Stiffness, g.Stiffness)
	over(&t.Force, g.Force)
	over(&t.Stiction, g.Stiction)
	over(&t.Temperature, g.Temperature)
	over(&t.Humidity, g.Humidity)
	over(&t.InchResolution, g.InchResolution)
	over(&t.Unit, g.Unit)
}

// over takes what is given.
func over[T comparable](out *T, given T) {
	var none T
	if given != none {
		*out = given
	}
}

func given[T ~float64](p *T, otherwise float64) float64 {
	if p == nil {
		return otherwise
	}
	return float64(*p)
}

// inches is a gauge's resolution in inches.
func inches(t TruthGauge, resolution float64) float64 {
	if t.InchResolution > 0 {
		return float64(t.InchResolution) / 25.4
	}
	want := resolution / 25.4
	decade := math.Pow(10, math.Floor(math.Log10(want)))
	for _, step := range []float64{1, 2, 5} {
		if step*decade >= want*0.999 {
			return step * decade
		}
	}
	return 10 * decade
}

func newGaugeTruth(c *config.Gauge, t TruthGauge, truth *Truth) gaugeTruth {
	d := gaugeTruth{
		curve: -1, sense: 1, preset: float64(t.Preset), offset: float64(t.Offset), gain: given(t.Gain, 1),
		noise: given(t.Noise, 0), drift: float64(t.Drift), resolution: c.Resolution.Value,
		inches: inches(t, c.Resolution.Value), low: math.Inf(-1), high: math.Inf(1), unit: "mm",
		onBeam: c.Sees == "" || c.Sees == "beam",
	}
	if c.Sense == "up" {
		d.sense = -1
	}
	if len(c.Travel) == 2 {
		d.low, d.high = c.Travel[0].Value, c.Travel[1].Value
	}
	if t.Unit != "" {
		d.unit = t.Unit
	}
	add := func(coefficient float64, room TruthSwing, lag Seconds) {
		if coefficient != 0 {
			d.climate = append(d.climate, newClimate(coefficient, room.swing(), float64(lag)))
		}
	}
	add(float64(t.Temperature), truth.Room.Temperature, 0)
	add(float64(t.Humidity), truth.Room.Humidity, 0)
	for _, stand := range truth.Stands {
		if stand.Name == c.Stand && c.Stand != "" {
			add(float64(stand.Temperature), truth.Room.Temperature, stand.Lag)
			add(float64(stand.Humidity), truth.Room.Humidity, stand.HumidityLag)
		}
	}
	d.climateAtStart = d.surroundings(0)
	return d
}

// respond works out what every gauge sees, and the net sag at every gauge.
func (s *Sim) respond(rig *config.Rig, truth *Truth) error {
	var views []view
	var springs []spring
	s.views = map[string]int{}
	for i := range rig.Gauges {
		c := &rig.Gauges[i]
		v, err := s.look(rig, c)
		if err != nil {
			return err
		}
		if c.Sees == "reference" {
			continue
		}
		s.gauges[i].gauge.curve = len(views)
		views = append(views, v)
		if v.seat >= 0 {
			continue
		}
		net := v
		net.net = true
		s.views[c.Name] = len(views)
		views = append(views, net)
		t := truth.gauge(c.Name)
		springs = append(springs, spring{at: c.At.Value, stiffness: given(t.Stiffness, 0), friction: given(t.Stiction, 0)})
	}
	moments := s.timeline.moments()
	s.response = newResponse(s.beam, s.timeline.loads, springs, s.timeline.shifts, moments, s.timeline.end, views)
	if truth.Place.Share > 0 {
		s.ring()
	}
	s.breakAt = math.Inf(1)
	if b := truth.Breaks; b != nil {
		at, err := s.timeline.instant(b.At, b.After)
		s.breakAt = at
		return err
	}
	return nil
}

// look says what a gauge looks at.
func (s *Sim) look(rig *config.Rig, c *config.Gauge) (view, error) {
	v := view{seat: -1, terms: []viewTerm{{c.At.Value, 1}}}
	if c.Sees == "seat" {
		v.seat = 0
		for i, p := range rig.Supports {
			if math.Abs(p.At.Value-c.At.Value) < math.Abs(rig.Supports[v.seat].At.Value-c.At.Value) {
				v.seat = i
			}
		}
	}
	if len(c.Bar) == 2 {
		a, b := c.Bar[0].Value, c.Bar[1].Value
		if a == b {
			return v, fmt.Errorf("%s: its bar rests at one place only", c.Name)
		}
		share := (c.At.Value - a) / (b - a)
		v.terms = append(v.terms, viewTerm{a, -(1 - share)}, viewTerm{b, -share})
	}
	return v, nil
}

// ring notes how far each change of load moved each gauge.
func (s *Sim) ring() {
	for _, g := range s.gauges {
		if g.probe != nil || g.gauge.curve < 0 {
			continue
		}
		for _, st := range s.timeline.steps {
			if st.Full <= st.From {
				continue
			}
			from, full := float64(st.From)/1e9, float64(st.Full)/1e9
			moved := s.curveAt(g.gauge.curve, full) - s.curveAt(g.gauge.curve, from)
			g.gauge.rings = append(g.gauge.rings, ring{from: full, amplitude: s.truth.Place.Share * moved})
		}
	}
}

func (s *Sim) curveAt(curve int, t float64) float64 {
	g := s.response.grid
	return s.response.curves[curve].at(g, g.find(t, 0), t)
}
