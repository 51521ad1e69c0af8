package config

import "slices"

// BuiltinFrames returns the frames that a rig may name without describing
// them. They are named by their shape; each needs its end, its unit and its
// line settings to be what the instrument's manual says, else a frame of its
// own is to be described. A frame of the rig with the same name goes before.
//
//	signed-decimal        +012.345 CR LF                streams, millimetres
//	signed-decimal-cr     +012.345 CR                   streams, millimetres
//	signed-decimal-inch   -0.01234 CR LF                streams, inches
//	decimal-unit          -1.234 mm CR LF               streams, unit in the frame (mm or in)
//	decimal-unit-cr       -1.234 mm CR                  streams, unit in the frame (mm or in)
//	asked-decimal-unit    ? CR gives -1.234 mm CR       asked, unit in the frame
//	channel-decimal       02 -1.234 CR LF               streams, several gauges on one port by channel, millimetres
//	temperature-humidity  +20.31 48.2 CR LF             streams, for probes: groups temperature, humidity
//	scpi-read             READ? LF gives -1.234E+00 LF  asked, millimetres
//
// Digits: one to three before the point, two to five behind it; the sign may
// be left out for a positive value, except in signed-decimal frames.
func BuiltinFrames() []Frame {
	const (
		signed  = `(?P<value>[+-]\d{1,3}\.\d{2,5})`
		decimal = `(?P<value>[+-]?\d{1,3}\.\d{2,5})`
		unit    = ` ?(?P<unit>mm|in)`
	)
	return []Frame{
		{Name: "signed-decimal", Kind: "text", End: "\r\n", Pattern: signed, Unit: "mm"},
		{Name: "signed-decimal-cr", Kind: "text", End: "\r", Pattern: signed, Unit: "mm"},
		{Name: "signed-decimal-inch", Kind: "text", End: "\r\n", Pattern: signed, Unit: "in"},
		{Name: "decimal-unit", Kind: "text", End: "\r\n", Pattern: decimal + unit},
		{Name: "decimal-unit-cr", Kind: "text", End: "\r", Pattern: decimal + unit},
		{Name: "asked-decimal-unit", Kind: "text", Request: "?\r", End: "\r", Pattern: decimal + unit},
		{Name: "channel-decimal", Kind: "text", End: "\r\n", Pattern: `(?P<channel>\d{1,2}) ` + decimal, Unit: "mm"},
		{Name: "temperature-humidity", Kind: "text", End: "\r\n",
			Pattern: `(?P<temperature>[+-]?\d{1,3}\.\d{1,3})[ ,;](?P<humidity>\d{1,3}\.\d{1,2})`},
		{Name: "scpi-read", Kind: "scpi", Unit: "mm", SCPI: &SCPI{Query: "READ?"}},
	}
}

// addBuiltinFrames puts the built-in frames that a gauge or probe names behind
// the rig's own, so that readers of Frames find every frame in one list.
func (r *Rig) addBuiltinFrames() {
	var own []string
	for _, f := range r.Frames {
		own = append(own, f.Name)
	}
	var named []string
	for _, g := range r.Gauges {
		named = append(named, g.Frame)
	}
	for _, b := range r.Probes {
		named = append(named, b.Frame)
	}
	for _, f := range BuiltinFrames() {
		if slices.Contains(named, f.Name) && !slices.Contains(own, f.Name) {
			r.Frames = append(r.Frames, f)
		}
	}
}

// FrameOf returns the frame called name, of the rig or built in.
func (r *Rig) FrameOf(name string) (Frame, bool) {
	for _, list := range [][]Frame{r.Frames, BuiltinFrames()} {
		for _, f := range list {
			if f.Name == name {
				return f, true
			}
		}
	}
	return Frame{}, false
}

// frameNames lists every frame a gauge or probe may name.
func (r *Rig) frameNames() []string {
	var names []string
	for _, list := range [][]Frame{r.Frames, BuiltinFrames()} {
		for _, f := range list {
			if !slices.Contains(names, f.Name) {
				names = append(names, f.Name)
			}
		}
	}
	return names
}
