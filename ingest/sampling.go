package ingest

import (
	"math"
	"time"

	"gaugelog/config"
)

// Figures of the sampling that no rig file states.
const (
	// jumpWithin is how far back a reading is compared: a load lowered over
	// some seconds is a jump, creep across the dead band in an hour is not.
	jumpWithin = int64(10 * time.Second)
	// jumpResolutions is the jump, in resolutions of the gauge, where the rig
	// states no dead band.
	jumpResolutions = 5
	// lateness is how much later than the moment it speaks of a mark may come
	// and still find everything around that moment in memory.
	lateness = int64(5 * time.Minute)
	// usualAround is the time around a change where dense is given alone.
	usualAround = int64(10 * time.Minute)
)

// policy is a rig's sampling in nanoseconds. Zero means not asked for.
type policy struct {
	all            bool
	every          int64
	denseThenLog   bool
	dense, around  int64
	perDecade      float64 // 10^(1/n)-1: the spacing as a share of the time since the change
	longest        int64
	deadBand       float64 // mm; a reading that far from the last stored one is stored
	changedAt      int64   // boot-time instant of the last change
	rememberedSpan int64
}

func newPolicy(s config.Sampling, start int64) policy {
	p := policy{
		all:       s.All,
		every:     nanoseconds(s.Every),
		dense:     nanoseconds(s.Dense),
		around:    nanoseconds(s.Around),
		longest:   nanoseconds(s.Longest),
		changedAt: start,
	}
	if s.PerDecade != nil && s.PerDecade.Value > 0 {
		p.perDecade = math.Pow(10, 1/s.PerDecade.Value) - 1
	}
	if s.DeadBand != nil {
		p.deadBand = s.DeadBand.Value
	}
	p.denseThenLog = p.dense > 0 || p.perDecade > 0 || p.longest > 0
	if !p.all && p.every == 0 && !p.denseThenLog && p.deadBand == 0 {
		p.all = true // nothing was said: lose nothing
	}
	if p.denseThenLog && p.around == 0 {
		p.around = usualAround
	}
	p.rememberedSpan = jumpWithin
	if !p.all && p.around > 0 {
		p.rememberedSpan = p.around + lateness
	}
	return p
}

func nanoseconds(d *config.Duration) int64 {
	if d == nil {
		return 0
	}
	return int64(math.Round(d.Value * 1e9))
}

// spacing is the interval asked for at instant t by dense, around, per_decade
// and longest; 0 is full rate.
func (p *policy) spacing(t int64) int64 {
	since := t - p.changedAt
	if since <= p.around {
		return p.dense
	}
	switch {
	case p.perDecade > 0:
		wide := max(p.dense, int64(p.perDecade*float64(since)))
		if p.longest > 0 {
			wide = min(wide, max(p.longest, p.dense))
		}
		return wide
	case p.longest > 0:
		return max(p.longest, p.dense)
	default:
		return p.dense
	}
}

// pace picks readings out of a stream at an interval: the one nearest to each
// due instant, so that the mean rate is the one asked for although readings
// jitter and their own interval does not divide it.
type pace struct{ due int64 }

// take says whether the reading at t is picked. interval is the stream's own
// interval, as last seen.
func (p *pace) take(t, spacing, interval int64) bool {
	early := min(interval, spacing) / 2
	if t < p.due-early {
		return false
	}
	if p.due == 0 || t-p.due > spacing {
		p.due = t
	}
	p.due += spacing
	return true
}

// channel is one gauge or probe of a run: what was seen of it, what was
// stored, and its last readings in memory.
type channel struct {
	name  string
	probe bool
	port  string
	jump  float64 // mm between readings that is a change; 0: never

	memory    memory
	reference uint64 // number of the oldest sample within jumpWithin
	jumping   bool

	seen, stored bool
	lastBoot     int64
	lastWall     int64 // of the last reading, as stamped
	interval     int64
	unit, status string
	storedMM     float64
	saying       saying
	evenly       pace // record.sampling.every
	densely      pace // record.sampling.dense and its companions
}

// stamp gives the wall stamp of a new reading: the one it came with, or one
// nanosecond after the channel's last, so that stamps of a series strictly increase.
func (c *channel) stamp(wall int64) int64 {
	if c.seen && wall <= c.lastWall {
		return c.lastWall + 1
	}
	return wall
}

// remember puts s into memory and says whether it is a jump: farther than the
// threshold from the oldest reading of the last ten seconds, or from the one
// before where readings come less often. It is said once, at the beginning.
func (c *channel) remember(s sample) (jumped bool) {
	c.memory.push(s)
	last := c.memory.next - 1
	if c.reference < c.memory.first {
		c.reference = c.memory.first
	}
	for c.reference+1 < last && s.boot-c.memory.at(c.reference).boot > jumpWithin {
		c.reference++
	}
	if c.jump <= 0 || c.reference == last {
		return false
	}
	was := c.jumping
	c.jumping = math.Abs(s.mm-c.memory.at(c.reference).mm) > c.jump
	return c.jumping && !was
}

// wants says whether s, the newest reading, is stored at once.
func (c *channel) wants(s *sample, p *policy) bool {
	if p.all {
		return true
	}
	keep := !c.stored
	if p.every > 0 && c.evenly.take(s.boot, p.every, c.interval) {
		keep = true
	}
	if !p.denseThenLog && p.around > 0 && s.boot-p.changedAt <= p.around {
		keep = true
	}
	if p.deadBand > 0 && !c.probe && math.Abs(s.mm-c.storedMM) > p.deadBand {
		keep = true
	}
	keep = keep || s.unit != c.unit || s.status != c.status
	if !p.denseThenLog {
		return keep
	}
	// A reading stored for another reason counts: the next is due one spacing
	// behind it.
	spacing := p.spacing(s.boot)
	if keep {
		c.densely.due = max(c.densely.due, s.boot+spacing)
		return true
	}
	return c.densely.take(s.boot, spacing, c.interval)
}
