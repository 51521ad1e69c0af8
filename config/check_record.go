package config

import (
	"fmt"
	"slices"
	"time"
	_ "time/tzdata" // so that a time zone is known on every machine, or on none
)

func (c *checker) records() {
	if tz := c.rig.Timezone; tz != "" {
		if _, err := time.LoadLocation(tz); err != nil || tz == "Local" {
			c.fail("timezone", quoted(tz)+" is not a time zone", "write a name of the IANA list, such as Europe/Dublin or UTC")
		}
	}
	c.sampling()
	rec := c.rig.Record
	switch s := rec.Sync.Value; {
	case c.rig.states("record.sync") && (s < 0.1 || s > 3600):
		c.fail("record.sync", "sync must lie between 100 ms and 1 h", "write how much a power cut may cost at most, such as 10 s")
	case s > 60:
		c.warn("record.sync", fmt.Sprintf("a power cut loses up to %s s of readings", mm(s)), "10 s is usual")
	}
	switch size := rec.Roll.Size.Value; {
	case c.rig.states("record.roll.size") && (size < 1e3 || size > 1e9):
		c.fail("record.roll.size", "roll.size must lie between 1 kB and 1 GB", "16 MB is usual")
	case size > 25e6:
		c.warn("record.roll.size", "line-protocol servers commonly refuse files over 25 MB", "16 MB is usual")
	}
	if age := rec.Roll.Age.Value; c.rig.states("record.roll.age") && (age < 1 || age > 366*86400) {
		c.fail("record.roll.age", "roll.age must lie between 1 s and 366 d", "24 h is usual")
	}
	c.read()
}

func (c *checker) sampling() {
	const p = "record.sampling"
	s := c.rig.Record.Sampling
	for _, d := range []struct {
		key  string
		with bool
	}{{"dense", s.Dense != nil}, {"around", s.Around != nil}, {"per_decade", s.PerDecade != nil}, {"longest", s.Longest != nil}} {
		if d.with && s.Every != nil {
			c.fail(p+"."+d.key, "sampling is at a fixed interval (every), and "+d.key+" belongs to the dense-then-sparse one",
				"keep every, or dense, around, per_decade and longest")
			return
		}
	}
	c.positive(p+".every", "every", s.Every, "1 s")
	c.positive(p+".dense", "dense", s.Dense, "1 s")
	c.positive(p+".around", "around", s.Around, "10 min")
	c.positive(p+".longest", "longest", s.Longest, "15 min")
	if n := s.PerDecade; n != nil && n.Value < 1 {
		c.fail(p+".per_decade", "per_decade must be at least 1", "write how many readings are kept per factor of ten in time, such as 50")
	}
	if b := s.DeadBand; b != nil && b.Value <= 0 {
		c.fail(p+".dead_band", "dead_band must be greater than zero", "write the jump that counts as a change, such as 0.005 mm")
	}
	if s.Dense == nil {
		return
	}
	if s.Around != nil && s.Around.Value < s.Dense.Value {
		c.fail(p+".around", "around is shorter than one dense interval", "write how long the dense sampling lasts, such as 10 min")
	}
	if s.Longest != nil && s.Longest.Value < s.Dense.Value {
		c.fail(p+".longest", "longest is shorter than dense", "write the longest interval between readings, such as 15 min")
	}
}

func (c *checker) read() {
	r := c.rig.Read
	switch after := r.InitialAfter.Value; {
	case c.rig.states("read.initial_after") && after <= 0:
		c.fail("read.initial_after", "initial_after must be greater than zero", "write the time after full load at which the initial sag is read, such as 60 s")
	case after > 3600:
		c.warn("read.initial_after", "an initial sag read more than an hour after loading contains much creep", "60 s is usual")
	}
	c.ascending("read.times", "times", r.Times)
	c.ascending("forecast", "forecast", c.rig.Forecast)
	if r.CreepGauge == "" {
		return
	}
	var beam []string
	for _, g := range c.rig.Gauges {
		if g.Name == r.CreepGauge && g.Sees != "beam" && g.Sees != "" {
			c.fail("read.creep_gauge", "gauge "+g.Name+" sees a "+g.Sees+", not the beam", "name a gauge that sees the beam, best the one with the greatest sag")
			return
		}
		if g.Sees == "beam" || g.Sees == "" {
			beam = append(beam, g.Name)
		}
	}
	if !slices.Contains(beam, r.CreepGauge) {
		c.fail("read.creep_gauge", "there is no gauge "+quoted(r.CreepGauge), nearestMend(r.CreepGauge, beam))
	}
}

// ascending checks a list of times after full load.
func (c *checker) ascending(path, key string, times []Duration) {
	for i, d := range times {
		if d.Value <= 0 {
			c.fail(at(path, i), key+" must all be greater than zero", "write times after full load, such as 1 h")
			return
		}
		if i > 0 && d.Value <= times[i-1].Value {
			c.warn(at(path, i), key+" are not in ascending order, or one stands twice", "write the shortest first")
			return
		}
	}
}

func (c *checker) limits() {
	l := c.rig.Limits
	for _, d := range []struct {
		key   string
		value *Length
	}{{"sag", l.Sag}, {"travel_left", l.TravelLeft}, {"catcher_gap", l.CatcherGap}} {
		if d.value != nil && d.value.Value <= 0 {
			c.fail("limits."+d.key, d.key+" must be greater than zero", "write a length such as 6 mm, or leave it out for no limit")
		}
	}
	if n := l.SpanOverSag; n != nil && n.Value <= 0 {
		c.fail("limits.span_over_sag", "span_over_sag must be greater than zero", "write 100 where the sag may be a hundredth of the span")
	}
	if l.Sag != nil && l.CatcherGap != nil && l.Sag.Value >= l.CatcherGap.Value {
		c.warn("limits.sag", "the sag limit is not below catcher_gap: the beam rests on the catcher before the limit is reached", "lower the catcher or the limit")
	}
	switch t := l.Temperature; {
	case len(t) == 0:
	case len(t) != 2:
		c.fail("limits.temperature", "limits.temperature needs two values", "write the lowest and the highest: temperature: [18 C, 24 C]")
	case t[0].Value >= t[1].Value:
		c.fail("limits.temperature", "limits.temperature is reversed", "write the lowest first: temperature: [18 C, 24 C]")
	}
	for i, t := range l.Temperature {
		if t.Value < -273.15 {
			c.fail(at("limits.temperature", i), quoted(t.Shown)+" is below absolute zero", "correct the value or its unit")
		}
	}
}
