package device

import (
	"fmt"
	"reflect"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// target is who gets an instrument's readings: a gauge or a probe of one rig.
type target struct {
	rig          int
	gauge, probe string
	// Indexes into Frame.Fields of a probe; -1: none.
	temperature, humidity int
}

// instrument is one sender of frames: a channel of one port. Several rigs may
// share it.
type instrument struct {
	channel string
	spec    config.Frame
	request []byte
	every   time.Duration
	timeout time.Duration
	silent  time.Duration // 0: the rig file does not say; negative: it may be for ever
	button  bool
	targets []target

	unit   frame.Unit // last unit seen
	due    time.Time
	misses int
}

func (in *instrument) asked() bool { return len(in.request) > 0 }

// portPlan is everything that hangs on one port.
type portPlan struct {
	name        string
	line        config.Line
	rigs        []int // in order, each once
	instruments []*instrument
}

// planPorts groups the gauges and probes of all rigs by port and channel.
func planPorts(rigs []*config.Rig) ([]*portPlan, error) {
	var plans []*portPlan
	for i, rig := range rigs {
		for g := range rig.Gauges {
			gauge := &rig.Gauges[g]
			t := target{rig: i, gauge: gauge.Name, temperature: -1, humidity: -1}
			err := place(&plans, rig, t, gauge.Port, gauge.Frame, gauge.Channel, gauge.Line, gauge.SilentAfter)
			if err != nil {
				return nil, fmt.Errorf("gauge %s: %w", gauge.Name, err)
			}
		}
		for b := range rig.Probes {
			probe := &rig.Probes[b]
			t := target{rig: i, probe: probe.Name, temperature: -1, humidity: -1}
			err := place(&plans, rig, t, probe.Port, probe.Frame, probe.Channel, probe.Line, probe.SilentAfter)
			if err == nil {
				err = placeFields(plans, probe)
			}
			if err != nil {
				return nil, fmt.Errorf("probe %s: %w", probe.Name, err)
			}
		}
	}
	return plans, nil
}

// place adds one target to the plan of its port.
func place(plans *[]*portPlan, rig *config.Rig, t target, port, frameName, channel string, own *config.Line, silent *config.Duration) error {
	if port == "" {
		return fmt.Errorf("no port is given: add port: usb:VID:PID:SERIAL (gaugelog ports lists them)")
	}
	var spec *config.Frame
	for i := range rig.Frames {
		if rig.Frames[i].Name == frameName {
			spec = &rig.Frames[i]
		}
	}
	if spec == nil {
		return fmt.Errorf("frame %q is not described under frames", frameName)
	}
	line := lineOf(own, spec.Line)
	var plan *portPlan
	for _, p := range *plans {
		if p.name == port {
			plan = p
		}
	}
	if plan == nil {
		plan = &portPlan{name: port, line: line}
		*plans = append(*plans, plan)
	}
	if plan.line != line {
		return fmt.Errorf("port %s is already used at %+v, here at %+v: give both the same line settings", port, plan.line, line)
	}
	if len(plan.rigs) == 0 || plan.rigs[len(plan.rigs)-1] != t.rig {
		plan.rigs = append(plan.rigs, t.rig)
	}
	return plan.add(t, *spec, channel, silent)
}

// add joins the target to the instrument on its channel, or makes a new one.
func (p *portPlan) add(t target, spec config.Frame, channel string, silent *config.Duration) error {
	if t.probe != "" && spec.Kind != string(frame.Text) {
		return fmt.Errorf("a %s frame carries an indication: a probe's temperature and humidity are groups of a text frame", spec.Kind)
	}
	spec.Name = "" // two rigs may call one description by different names
	for _, in := range p.instruments {
		if in.channel != channel || !reflect.DeepEqual(in.spec, spec) {
			continue
		}
		for _, other := range in.targets {
			if other.rig == t.rig && t.gauge != "" && other.gauge != "" {
				return fmt.Errorf("port %s channel %q already feeds gauge %s: give each its own channel", p.name, channel, other.gauge)
			}
		}
		in.targets = append(in.targets, t)
		return nil
	}
	request, err := requestFor(spec, channel)
	if err != nil {
		return err
	}
	if t.gauge != "" && spec.Kind == string(frame.Text) && !strings.Contains(spec.Pattern, "<value>") {
		return fmt.Errorf("pattern %q has no group value: write (?P<value>...)", spec.Pattern)
	}
	p.instruments = append(p.instruments, &instrument{
		channel: channel, spec: spec, request: request, button: spec.Button,
		every: span(spec.Every, defaultEvery), timeout: span(spec.Timeout, defaultTimeout),
		silent: silence(silent), targets: []target{t},
	})
	return nil
}

// silence is how long a gauge may be silent; negative: for ever.
func silence(d *config.Duration) time.Duration {
	if d != nil && *d == config.Never {
		return -1
	}
	return span(d, 0)
}

// placeFields finds the probe's groups in its frame's pattern.
func placeFields(plans []*portPlan, probe *config.Probe) error {
	for _, p := range plans {
		if p.name != probe.Port {
			continue
		}
		for _, in := range p.instruments {
			t := &in.targets[len(in.targets)-1]
			if t.probe != probe.Name {
				continue
			}
			names, err := frame.FieldNames(in.spec.Pattern)
			if err != nil {
				return err
			}
			for i, name := range names {
				if name == probe.Temperature {
					t.temperature = i
				}
				if name == probe.Humidity {
					t.humidity = i
				}
			}
			if (probe.Temperature != "" && t.temperature < 0) || (probe.Humidity != "" && t.humidity < 0) {
				return fmt.Errorf("pattern %q lacks a group %q or %q", in.spec.Pattern, probe.Temperature, probe.Humidity)
			}
		}
	}
	return nil
}

// slotsOf builds the decoders of a port: one for each description of the
// senders that need no asking, one for each instrument that is asked.
func (p *portPlan) slotsOf() ([]*slot, error) {
	var slots []*slot
	for _, in := range p.instruments {
		if !in.asked() {
			joined := false
			for _, s := range slots {
				if s.asked == nil && reflect.DeepEqual(s.senders[0].spec, in.spec) {
					s.senders = append(s.senders, in)
					joined = true
				}
			}
			if joined {
				continue
			}
		}
		o, err := FrameOptions(in.spec, in.channel)
		if err != nil {
			return nil, err
		}
		d, err := frame.New(o)
		if err != nil {
			return nil, err
		}
		s := &slot{decoder: d, senders: []*instrument{in}, gaps: o.Kind != frame.Text && o.Kind != frame.SCPIReply}
		if in.asked() {
			s.asked = in
		}
		if s.identity, err = identityCheckOf(in.spec); err != nil {
			return nil, err
		}
		slots = append(slots, s)
	}
	return slots, nil
}
