package config

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// CheckPorts looks at the ports and frames, which only recording needs: an
// analysis of readings made elsewhere does without. It returns errors and
// warnings in the order of the file's lines.
func (r *Rig) CheckPorts() []Problem {
	c := &checker{rig: r}
	c.frames()
	ports := map[string]*sharedPort{}
	for i := range r.Gauges {
		g := &r.Gauges[i]
		f := c.connection(at("gauges", i), "gauge "+g.Name, g.Port, g.Frame, g.Line, ports)
		if f == nil {
			continue
		}
		c.gaugeFrame(at("gauges", i), g, f)
		c.channel(at("gauges", i), "gauge "+g.Name, g.Port, g.Channel, f, ports[g.Port])
	}
	for i := range r.Probes {
		b := &r.Probes[i]
		f := c.connection(at("probes", i), "probe "+b.Name, b.Port, b.Frame, b.Line, ports)
		if f != nil {
			c.probeFrame(at("probes", i), b, f)
		}
	}
	c.problems.sort()
	return c.problems
}

// sharedPort is what the instruments on one port have in common.
type sharedPort struct {
	who  string // the first on it
	line Line
	bus  map[string]string // modbus address and register: who
}

// connection checks that there is a port and a known frame, and that all on
// one port agree on its line; nil where no frame was found.
func (c *checker) connection(p, who, port, frame string, own *Line, ports map[string]*sharedPort) *Frame {
	if port == "" {
		c.fail(p, who+" has no port", "add port: and its stable identity; gaugelog ports lists them")
	} else if strings.TrimSpace(port) != port || strings.ContainsAny(port, "\t\r\n") {
		c.fail(p+".port", "port "+quoted(port)+" has blanks around it", "copy it from gaugelog ports")
	}
	if frame == "" {
		c.fail(p, who+" has no frame", "add frame: and the name of one in frames, or a built-in one: "+strings.Join(builtinNames(), ", "))
		return nil
	}
	f, ok := c.rig.FrameOf(frame)
	if !ok {
		c.fail(p+".frame", "there is no frame "+quoted(frame), nearestMend(frame, c.rig.frameNames()))
		return nil
	}
	if own != nil {
		c.line(p+".line", own)
	}
	if port == "" {
		return &f
	}
	line := f.LineWith(own)
	shared := ports[port]
	if shared == nil {
		ports[port] = &sharedPort{who: who, line: line, bus: map[string]string{}}
	} else if shared.line != line {
		c.fail(p+".port", fmt.Sprintf("%s and %s share port %s with different line settings (%s and %s)", shared.who, who, port, shared.line.short(), line.short()),
			"give both the same baud, data_bits, parity and stop_bits, or correct one port")
	}
	return &f
}

func builtinNames() []string {
	var names []string
	for _, f := range BuiltinFrames() {
		names = append(names, f.Name)
	}
	return names
}

// short writes line settings in the trade's way: 9600 8N1.
func (l Line) short() string {
	parity := "?"
	if l.Parity != "" {
		parity = strings.ToUpper(l.Parity[:1])
	}
	s := fmt.Sprintf("%d %d%s%s", l.Baud, l.DataBits, parity, l.StopBits)
	for _, level := range []struct{ name, value string }{{"DTR", l.DTR}, {"RTS", l.RTS}} {
		if level.value != "" {
			s += " " + level.name + " " + level.value
		}
	}
	return s
}

// gaugeFrame checks what a gauge needs of its frame.
func (c *checker) gaugeFrame(p string, g *Gauge, f *Frame) {
	if f.Kind == "text" && f.Pattern != "" && !slices.Contains(groupsOf(f.Pattern), "value") {
		c.fail(p+".frame", "frame "+f.Name+" of gauge "+g.Name+" has no group value in its pattern",
			`put the digits with their sign into (?P<value>...), such as (?P<value>[+-]\d+\.\d+)`)
	}
	if !f.hasUnit() {
		c.fail(p+".frame", "frame "+f.Name+" of gauge "+g.Name+" does not say the unit", "add unit: mm or unit: in to the frame, or a group (?P<unit>mm|in) where the instrument sends it")
	}
	if g.SilentAfter != nil && *g.SilentAfter != Never && f.Every != nil && g.SilentAfter.Value <= f.Every.Value {
		c.warn(p+".silent_after", "gauge "+g.Name+" counts as silent before its next reading is due", "make silent_after several times the frame's every")
	}
}

func (f *Frame) hasUnit() bool {
	return f.Unit != "" || slices.Contains(groupsOf(f.Pattern), "unit") ||
		f.Nibbles != nil && f.Nibbles.Unit != nil ||
		f.Binary != nil && slices.ContainsFunc(f.Binary.Flags, func(flag Flag) bool { return flag.Means == "in" })
}

// channel checks that a channel has a use, and that no bus address is used
// twice for the same register.
func (c *checker) channel(p, who, port, channel string, f *Frame, shared *sharedPort) {
	if f.Kind == "modbus" && f.Modbus != nil {
		c.busAddress(p, who, channel, f.Modbus, shared)
		return
	}
	inGroup, inRequest := slices.Contains(groupsOf(f.Pattern), "channel"), strings.Contains(f.Request, "{channel}")
	if f.SCPI != nil {
		inRequest = inRequest || strings.Contains(f.SCPI.Query, "{channel}")
	}
	switch {
	case channel == "" && (inGroup || inRequest):
		c.fail(p, who+" has no channel, and frame "+f.Name+" serves several", "add channel: and what the instrument calls it, in quotes, such as channel: \"2\"")
	case channel != "" && !inGroup && !inRequest:
		c.fail(p+".channel", "channel "+quoted(channel)+" of "+who+" has no effect: frame "+f.Name+" knows no channel",
			"add a group (?P<channel>...) to its pattern or {channel} to its request; else take channel out")
	}
}

func (c *checker) busAddress(p, who, channel string, m *Modbus, shared *sharedPort) {
	address := 0
	if m.Address != nil {
		address = *m.Address
	} else if n, err := strconv.Atoi(channel); err == nil && n >= 1 && n <= 247 {
		address = n
	} else {
		c.fail(p+".channel", "channel "+quoted(channel)+" of "+who+" is no bus address", "write the address the instrument is set to, from 1 to 247, as its channel")
		return
	}
	if shared == nil {
		return
	}
	key := fmt.Sprintf("%d %s %d", address, m.Function, m.Register)
	if other, twice := shared.bus[key]; twice {
		c.fail(p, fmt.Sprintf("%s and %s are both at bus address %d, register %d", other, who, address, m.Register),
			"set one instrument to another address, and write it as its channel")
		return
	}
	shared.bus[key] = who
}

// probeFrame checks that the groups a probe names are in its frame.
func (c *checker) probeFrame(p string, b *Probe, f *Frame) {
	if f.Kind != "text" {
		return
	}
	groups := groupsOf(f.Pattern)
	for _, figure := range []struct{ key, group string }{{"temperature", b.Temperature}, {"humidity", b.Humidity}} {
		if figure.group != "" && !slices.Contains(groups, figure.group) {
			c.fail(p+"."+figure.key, "frame "+f.Name+" has no group "+quoted(figure.group), nearestMend(figure.group, groups))
		}
	}
}
