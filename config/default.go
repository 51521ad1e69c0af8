package config

// Defaults that more than one place states.
const (
	DefaultBaud         = 9600
	DefaultDataBits     = 8
	DefaultLongestFrame = 256 // bytes
)

func seconds(s float64) Duration { return Duration{Quantity{Value: s}} }
func one() Number                { return Number{Quantity{Value: 1}} }

// fillDefaults writes the documented default into every field that the file
// left out. A default's Shown is empty.
func (r *Rig) fillDefaults() {
	setDefault(&r.Timezone, "UTC")
	setDefault(&r.Specimen.Material, "other")
	for i := range r.Supports {
		setDefault(&r.Supports[i].Kind, "pin")
	}
	for i := range r.Gauges {
		r.Gauges[i].fillDefaults()
	}
	r.addBuiltinFrames()
	for i := range r.Frames {
		r.fillFrame(i)
	}
	for i := range r.Loads {
		if r.Loads[i].Lever == nil {
			lever := one()
			r.Loads[i].Lever = &lever
		}
	}
	if r.Record.Sampling == (Sampling{}) {
		r.Record.Sampling.All = true // nothing was said: lose nothing
	}
	r.duration(&r.Record.Sync, "record.sync", 10)
	r.duration(&r.Record.Roll.Age, "record.roll.age", 86400)
	if !r.states("record.roll.size") {
		r.Record.Roll.Size = Size{Quantity{Value: 16e6}}
	}
	r.duration(&r.Read.InitialAfter, "read.initial_after", 60)
	r.fillAlarms()
}

func setDefault(field *string, value string) {
	if *field == "" {
		*field = value
	}
}

func (r *Rig) duration(field *Duration, path string, value float64) {
	if !r.states(path) {
		*field = seconds(value)
	}
}

// states reports whether the file itself holds a value at path.
func (r *Rig) states(path string) bool {
	if r.source == nil {
		return false
	}
	_, ok := r.source.places[path]
	return ok
}

func (g *Gauge) fillDefaults() {
	setDefault(&g.Sees, "beam")
	if c := g.Calibration; c != nil && c.Gain.Shown == "" {
		c.Gain = one()
	}
}

// fillFrame fills frame i. A gauge's or probe's own line is left as it is: what
// it does not state comes from the frame (see Frame.LineWith).
func (r *Rig) fillFrame(i int) {
	f, path := &r.Frames[i], at("frames", i)
	r.whole(&f.Line.Baud, path+".line.baud", DefaultBaud)
	r.whole(&f.Line.DataBits, path+".line.data_bits", DefaultDataBits)
	setDefault(&f.Line.Parity, "none")
	setDefault(&f.Line.StopBits, "1")
	r.whole(&f.Longest, path+".longest", DefaultLongestFrame)
	if !f.Asked() {
		return
	}
	if f.Every == nil {
		every := seconds(1)
		f.Every = &every
	}
	if f.Timeout == nil {
		timeout := seconds(0.5)
		f.Timeout = &timeout
	}
}

func (r *Rig) whole(field *int, path string, value int) {
	if *field == 0 && !r.states(path) {
		*field = value
	}
}

// Asked reports whether the instrument answers only when asked.
func (f Frame) Asked() bool { return f.Request != "" || f.Kind == "modbus" || f.Kind == "scpi" }

// LineWith returns the frame's line with what over states put in its place;
// over may be nil.
func (f Frame) LineWith(over *Line) Line {
	l := f.Line
	if over == nil {
		return l
	}
	if over.Baud != 0 {
		l.Baud = over.Baud
	}
	if over.DataBits != 0 {
		l.DataBits = over.DataBits
	}
	for _, s := range []struct{ to, from *string }{
		{&l.Parity, &over.Parity}, {&l.StopBits, &over.StopBits}, {&l.DTR, &over.DTR}, {&l.RTS, &over.RTS},
	} {
		if *s.from != "" {
			*s.to = *s.from
		}
	}
	return l
}
