package past

import (
	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// Channels numbers what a rig's instruments say: its gauges, then each probe's
// temperature and humidity.
type Channels struct {
	names  []string
	gauges int
	index  map[string]int // "gauge NAME" and "probe NAME", of the temperature
}

// ChannelsOf numbers the channels of a rig.
func ChannelsOf(rig *config.Rig) *Channels {
	c := &Channels{gauges: len(rig.Gauges), index: map[string]int{}}
	for _, g := range rig.Gauges {
		c.index["gauge "+g.Name] = len(c.names)
		c.names = append(c.names, g.Name)
	}
	for _, p := range rig.Probes {
		c.index["probe "+p.Name] = len(c.names)
		c.names = append(c.names, p.Name+" temperature", p.Name+" humidity")
	}
	return c
}

// Names names the channels by their numbers.
func (c *Channels) Names() []string { return c.names }

// Gauge is the number of a gauge; false where the rig has none of that name.
func (c *Channels) Gauge(name string) (int, bool) { i, ok := c.index["gauge "+name]; return i, ok }

// Probe is the number of a probe's temperature, behind which its humidity
// follows; false where the rig has none of that name.
func (c *Channels) Probe(name string) (int, bool) { i, ok := c.index["probe "+name]; return i, ok }

// Each hands over what a record says of the channels.
func (c *Channels) Each(r *segment.Record, take func(channel int, v float64)) {
	switch r.Kind {
	case segment.Indication:
		if i, ok := c.Gauge(r.Name); ok {
			take(i, r.MM)
		}
	case segment.Ambient:
		i, ok := c.Probe(r.Name)
		if !ok || r.Point == nil {
			return
		}
		for k, field := range []string{"celsius", "humidity_percent"} {
			if v, ok := r.Point.Value(field); ok {
				if f, ok := v.(float64); ok {
					take(i+k, f)
				}
			}
		}
	}
}

// batch hands over what a batch says of the channels; gauges names its gauges by
// their numbers, of which numbers are those of the channels, -1 for another.
func (c *Channels) batch(b *segment.Batch, numbers []int, take func(channel int, t int64, v float64)) {
	for i, g := range b.Gauge {
		if k := numbers[g]; k >= 0 {
			take(k, b.Time[i], float64(b.Micro[i])/1e6)
		}
	}
	for i := range b.Others {
		r := &b.Others[i]
		c.Each(r, func(channel int, v float64) { take(channel, r.Time, v) })
	}
}

// numbers are the channels of gauges named as a reader does.
func (c *Channels) numbers(gauges []string, known []int) []int {
	for _, g := range gauges[len(known):] {
		k, ok := c.Gauge(g)
		if !ok {
			k = -1
		}
		known = append(known, k)
	}
	return known
}
