package stiffness

import (
	"fmt"
	"math"

	"gaugelog/config"
)

// StandardGravity is the conventional value, m/s2 (exact).
const StandardGravity = 9.80665

// Gravity at sea level runs from 9.7803 at the equator to 9.8322 at the
// poles; where no place is stated, the standard value is off by at most about
// half that range, taken as rectangular.
const unplacedGravity = (9.8322 - 9.7803) / 2 / 1.7320508075688772

// anomaly is the standard uncertainty of the latitude formula against the
// ground's own irregularities: about 50 mGal (common practice).
const anomaly = 5e-4

// GravityOf is the acceleration of gravity in m/s2 with its standard
// uncertainty. A stated value goes before a place. For a place:
// g = 9.780327 (1 + 0.0053024 sin2(lat) - 0.0000058 sin2(2 lat)) - 3.086e-6 H,
// H in m (the 1967 form of the international formula with the free-air
// term), whose u adds local anomalies to those of latitude and height. Where
// neither is stated it is standard gravity with the range over the globe as
// its uncertainty; source says which.
func GravityOf(c config.Gravity) (g Value, source string, err error) {
	switch {
	case c.Value != nil:
		if !(c.Value.Value > 9 && c.Value.Value < 10.5) {
			return Value{}, "", fmt.Errorf("gravity: %g\u202fm/s2 is found nowhere on the ground; mend: state the local value, 9.76 to 9.84", c.Value.Value)
		}
		return Value{c.Value.Value, c.Value.U}, "stated in the rig file", nil
	case c.Latitude != nil:
		lat, h := c.Latitude.Value, 0.0
		if !(math.Abs(lat) <= 90) {
			return Value{}, "", fmt.Errorf("gravity: latitude %g; mend: state it in degrees, -90 to 90", lat)
		}
		u := anomaly
		if c.Height != nil {
			h = c.Height.Value / 1000
			u = math.Hypot(u, 3.086e-6*c.Height.U/1000)
		}
		u = math.Hypot(u, (normalGravity(lat+0.5)-normalGravity(lat-0.5))*c.Latitude.U)
		return Value{normalGravity(lat) - 3.086e-6*h, u}, "latitude and height, with local anomalies", nil
	}
	return Value{StandardGravity, unplacedGravity}, "standard gravity; the place is not stated", nil
}

func normalGravity(lat float64) float64 {
	phi := lat * math.Pi / 180
	s, s2 := math.Sin(phi), math.Sin(2*phi)
	return 9.780327 * (1 + 0.0053024*s*s - 0.0000058*s2*s2)
}
