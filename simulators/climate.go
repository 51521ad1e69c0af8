package simulators

import "math"

// swing is a daily or other swing with a trend, and what a first-order lag
// makes of it. The lag is taken as settled: the room has swung like this for
// long before the test.
type swing struct {
	mean, swing, rate, peak, trend float64 // rate in rad/s, trend per s
}

func (s TruthSwing) swing() swing {
	period := float64(s.Period)
	if period <= 0 {
		period = 86400
	}
	return swing{mean: s.Mean, swing: s.Swing, rate: 2 * math.Pi / period, peak: float64(s.Peak), trend: s.Trend / 86400}
}

// at is the value in the room at t (s).
func (s swing) at(t float64) float64 {
	return s.mean + s.swing*math.Cos(s.rate*(t-s.peak)) + s.trend*t
}

// climate is one influence of the room on a gauge: coefficient times the
// lagged value.
type climate struct {
	coefficient float64
	room        swing
	lag         float64 // s
	share       float64 // of the swing that is left behind the lag
	phase       float64 // rad by which it comes later
}

func newClimate(coefficient float64, room swing, lag float64) climate {
	return climate{
		coefficient: coefficient, room: room, lag: lag,
		share: 1 / math.Hypot(1, room.rate*lag), phase: math.Atan(room.rate * lag),
	}
}

// at is the influence in mm of apparent sag at t (s).
func (c *climate) at(t float64) float64 {
	r := &c.room
	return c.coefficient * (r.swing*c.share*math.Cos(r.rate*(t-r.peak)-c.phase) + r.trend*(t-c.lag))
}

// surroundings is the sum of all influences.
func (d *gaugeTruth) surroundings(t float64) float64 {
	sum := 0.0
	for i := range d.climate {
		sum += d.climate[i].at(t)
	}
	return sum
}

// probeTruth is what a probe reads.
type probeTruth struct {
	temperature, humidity           swing
	noiseTemperature, noiseHumidity float64
}

// pace is how often instruments send from an instant on, in ns.
type pace struct{ from, every int64 }

func newPaces(t *Truth, tl *timeline) ([]pace, error) {
	var out []pace
	for _, p := range t.Pace {
		at, err := tl.instant(p.At, p.After)
		if err != nil {
			return nil, err
		}
		one := pace{from: nanoseconds(at), every: nanoseconds(float64(p.Every))}
		if n := len(out); n > 0 && one.from < out[n-1].from {
			return nil, errPaceOrder
		}
		out = append(out, one)
	}
	return out, nil
}
