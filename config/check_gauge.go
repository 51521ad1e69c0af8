package config

import (
	"fmt"
	"math"
	"time"
)

func (c *checker) gauges() {
	if len(c.rig.Gauges) == 0 {
		c.fail("gauges", "the rig has no gauge", "add gauges: with at least one entry of name, at, sense and resolution")
	}
	seen := map[string]string{}
	for i := range c.rig.Gauges {
		g, p := &c.rig.Gauges[i], at("gauges", i)
		c.name(p+".name", "gauge", g.Name, seen)
		c.gaugePlace(p, g)
		c.gaugeValues(p, g)
		if g.Calibration != nil {
			c.calibration(p+".calibration", g)
		}
		if g.Contact != nil {
			c.contact(p+".contact", g.Contact)
		}
		if g.Stand != "" && !nameText.MatchString(g.Stand) {
			c.fail(p+".stand", "stand name "+quoted(g.Stand)+" is not of small letters, digits, - and _", "begin with a letter or digit, and use no blanks or capitals")
		}
		c.silentAfter(p, g.SilentAfter, "10 s")
	}
	c.probes(map[string]string{})
	c.channels()
}

// gaugePlace checks where the gauge is and what it sees there.
func (c *checker) gaugePlace(p string, g *Gauge) {
	c.oneOf(p+".sees", "what gauge "+g.Name+" sees", g.Sees, "beam", "seat", "reference")
	if g.Sees == "reference" {
		return // a fixed block need not stand beside the beam
	}
	if c.missing(p + ".at") {
		c.fail(p, "gauge "+g.Name+" has no place", "add at: and its place along the beam, such as at: 300 mm")
		return
	}
	if g.Sees == "seat" {
		c.seat(p, g)
	} else {
		c.inside(p+".at", "gauge "+g.Name, g.At.Value)
	}
	if len(g.Bar) == 0 {
		return
	}
	if len(g.Bar) != 2 {
		c.fail(p+".bar", fmt.Sprintf("bar of gauge %s has %d places, and a bar rests on two", g.Name, len(g.Bar)), "write bar: [0 mm, 600 mm]")
		return
	}
	if g.Sees == "seat" {
		c.fail(p+".bar", "gauge "+g.Name+" sees a support's seat, and yet a bar on the beam carries it", "keep sees: seat or bar")
	}
	if g.Bar[0].Value >= g.Bar[1].Value {
		c.fail(p+".bar", "the places of gauge "+g.Name+"'s bar are in the wrong order or the same", "write the smaller one first: bar: [0 mm, 600 mm]")
	}
	c.inside(at(p+".bar", 0), "the bar of gauge "+g.Name, g.Bar[0].Value)
	c.inside(at(p+".bar", 1), "the bar of gauge "+g.Name, g.Bar[1].Value)
}

// seat warns of a seat gauge that no support is near.
func (c *checker) seat(p string, g *Gauge) {
	nearest := math.Inf(1)
	for _, s := range c.rig.Supports {
		nearest = min(nearest, math.Abs(s.At.Value-g.At.Value))
	}
	if nearest > 1 && !math.IsInf(nearest, 1) {
		c.warn(p+".at", fmt.Sprintf("gauge %s sees a seat, but the nearest support is %s\u202fmm away", g.Name, mm(nearest)),
			"write the place of the support whose seat it follows")
	}
}

func (c *checker) gaugeValues(p string, g *Gauge) {
	if g.Sense == "" {
		c.fail(p, "gauge "+g.Name+" has no sense", "add sense: down if the indication grows when the beam goes down, else sense: up")
	}
	c.oneOf(p+".sense", "sense of gauge "+g.Name, g.Sense, "down", "up")
	switch {
	case c.missing(p + ".resolution"):
		c.fail(p, "gauge "+g.Name+" has no resolution", "add the step of its last digit, such as resolution: 0.001 mm")
	case g.Resolution.Value <= 0:
		c.fail(p+".resolution", "resolution of gauge "+g.Name+" must be greater than zero", "write the step of its last digit, such as 0.001 mm")
	case g.Resolution.Value > 1:
		c.warn(p+".resolution", fmt.Sprintf("resolution of gauge %s is coarse: %s\u202fmm", g.Name, mm(g.Resolution.Value)), "check the unit of the resolution")
	}
	switch {
	case len(g.Travel) == 0:
	case len(g.Travel) != 2:
		c.fail(p+".travel", fmt.Sprintf("travel of gauge %s has %d values, and two are needed", g.Name, len(g.Travel)), "write the lowest and the highest indication: travel: [0 mm, 12.7 mm]")
	case g.Travel[0].Value >= g.Travel[1].Value:
		c.fail(p+".travel", "travel of gauge "+g.Name+" is reversed", "write the lowest indication first, then the highest; the direction goes into sense")
	case g.Resolution.Value >= g.Travel[1].Value-g.Travel[0].Value:
		c.fail(p+".resolution", "resolution of gauge "+g.Name+" is as large as its travel", "check the unit of both")
	}
	if g.U != nil && g.U.Value <= 0 {
		c.fail(p+".u", "u of gauge "+g.Name+" must be greater than zero", "write its standard uncertainty, such as 0.002 mm, or leave it out: the resolution then gives it")
	} else if g.U != nil && g.U.Value < 0.99*g.Resolution.Value/math.Sqrt(12) {
		c.warn(p+".u", "u of gauge "+g.Name+" is smaller than its resolution allows (resolution / 3.46)", "check the certificate: it may state another quantity")
	}
}

func (c *checker) calibration(p string, g *Gauge) {
	k := g.Calibration
	switch gain := k.Gain.Value; {
	case gain == 0:
		c.fail(p+".gain", "calibration gain of gauge "+g.Name+" is zero: indication = offset + gain * true", "write the slope of the calibration line, near 1, or leave it out")
	case gain < 0:
		c.fail(p+".gain", "calibration gain of gauge "+g.Name+" is negative", "the direction goes into sense; the gain is near 1")
	case math.Abs(gain-1) > 0.1:
		c.warn(p+".gain", fmt.Sprintf("calibration gain of gauge %s is %v, more than a tenth from 1", g.Name, gain), "check that it is the slope of indication against true, not an error in percent")
	}
	if k.UOffset != nil && k.UOffset.Value <= 0 {
		c.fail(p+".u_offset", "u_offset must be greater than zero", "leave it out where it is not known")
	}
	if k.UGain != nil && k.UGain.Value <= 0 {
		c.fail(p+".u_gain", "u_gain must be greater than zero", "leave it out where it is not known")
	}
	if r := k.Correlation; r != nil {
		if math.Abs(r.Value) > 1 {
			c.fail(p+".correlation", "correlation must lie between -1 and 1", "write the correlation coefficient of offset and gain, not the covariance")
		} else if k.UOffset == nil || k.UGain == nil {
			c.warn(p+".correlation", "a correlation without u_offset and u_gain has no effect", "add both, or take it out")
		}
	}
	date, dated := c.date(p+".date", k.Date)
	due, isDue := c.date(p+".due", k.Due)
	if dated && isDue && due.Before(date) {
		c.fail(p+".due", "calibration of gauge "+g.Name+" is due before its date", "correct one of the two")
	}
}

func (c *checker) date(path, text string) (time.Time, bool) {
	if text == "" {
		return time.Time{}, false
	}
	day, err := time.Parse(time.DateOnly, text)
	if err != nil {
		c.fail(path, quoted(text)+" is not a date", "write year-month-day, such as 2026-09-14")
	}
	return day, err == nil
}

func (c *checker) contact(p string, k *Contact) {
	if k.Side == "" {
		c.fail(p, "contact has no side", "add side: above if the plunger presses down on the beam, side: below if it presses up")
	}
	c.oneOf(p+".side", "side", k.Side, "above", "below")
	if k.Force != nil && k.Force.Value < 0 {
		c.fail(p+".force", "contact force must not be negative", "the direction goes into side")
	}
	if k.Stiffness != nil && k.Stiffness.Value < 0 {
		c.fail(p+".stiffness", "contact stiffness must not be negative", "write by how much the force grows per mm the plunger is pushed in, such as 0.02 N/mm")
	}
	if k.Friction != nil && k.Friction.Value < 0 {
		c.fail(p+".friction", "contact friction must not be negative", "write the greatest force by which the plunger sticks either way, such as 0.1 N")
	}
}

// positive checks an optional time.
func (c *checker) positive(path, key string, d *Duration, example string) {
	if d != nil && d.Value <= 0 {
		c.fail(path, key+" must be greater than zero", "write a time such as "+example+", or leave it out")
	}
}

// silentAfter checks the time a gauge or probe may be silent, which may be none.
func (c *checker) silentAfter(p string, d *Duration, example string) {
	if d != nil && *d != Never && d.Value <= 0 {
		c.fail(p+".silent_after", "silent_after must be greater than zero", "write a time such as "+example+", none where it may be silent for ever, or leave it out")
	}
}

func (c *checker) probes(seen map[string]string) {
	for i := range c.rig.Probes {
		b, p := &c.rig.Probes[i], at("probes", i)
		c.name(p+".name", "probe", b.Name, seen)
		if b.Temperature == "" && b.Humidity == "" {
			c.warn(p, "probe "+b.Name+" reads nothing", "add temperature: or humidity: with the name of the group in its frame's pattern")
		}
		c.silentAfter(p, b.SilentAfter, "60 s")
	}
}

// channels refuses two gauges on one port and channel. A probe may share both
// with a gauge or a probe: one instrument can send several figures.
func (c *checker) channels() {
	type place struct{ port, channel string }
	taken := map[place]string{}
	for i, g := range c.rig.Gauges {
		if g.Port == "" {
			continue
		}
		where := place{g.Port, g.Channel}
		other, twice := taken[where]
		if !twice {
			taken[where] = g.Name
			continue
		}
		which := "port " + g.Port
		if g.Channel != "" {
			which += ", channel " + g.Channel
		}
		c.fail(at("gauges", i)+".port", "gauges "+other+" and "+g.Name+" are both on "+which,
			"correct one port; where one port serves several gauges, give each its own channel:")
	}
}
