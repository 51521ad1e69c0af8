package beam

import "math"

// Extreme is a place in mm and the value there.
type Extreme struct{ At, Value float64 }

// Greatest is the greatest sag between two places (mm, downward positive) and
// where it is. Each stretch of the line between forces is a polynomial of
// degree four or less: its curvature's roots cut the stretch into parts in
// which the slope is monotone, and in each the slope's root is found by
// bisection-guarded Newton steps, so none is missed. Ends of stretches (and
// tips of overhangs) count as well.
func (s *Solution) Greatest(from, to float64) Extreme { return s.extreme(from, to, 1) }

// Least is the smallest sag between two places: the greatest rise, where it
// is below zero.
func (s *Solution) Least(from, to float64) Extreme { return s.extreme(from, to, -1) }

func (s *Solution) extreme(from, to, sign float64) Extreme {
	lo, hi := s.xi(math.Min(from, to)), s.xi(math.Max(from, to))
	best := Extreme{At: lo, Value: math.Inf(-1)}
	try := func(xi float64) {
		if v := sign * s.Deflection(s.place(xi)); v > best.Value {
			best = Extreme{At: xi, Value: v}
		}
	}
	try(lo)
	try(hi)
	for _, seg := range s.segments(lo, hi) {
		try(seg[0])
		try(seg[1])
		for _, part := range s.monotone(seg) {
			if xi, ok := s.flat(part[0], part[1], seg); ok {
				try(xi)
			}
		}
	}
	return Extreme{At: s.place(best.At), Value: sign * best.Value}
}

func (s *Solution) place(xi float64) float64 { return s.beam.From + xi*s.beam.Length }

// segments are the stretches between forces within lo..hi.
func (s *Solution) segments(lo, hi float64) [][2]float64 {
	var out [][2]float64
	cuts := s.places()
	for i := 1; i < len(cuts); i++ {
		a, b := math.Max(lo, cuts[i-1]), math.Min(hi, cuts[i])
		if b > a {
			out = append(out, [2]float64{a, b})
		}
	}
	return out
}

// cubic is the slope on one stretch as a polynomial in t = xi - xi0:
// slope = c0 + c1 t + c2 t^2 + c3 t^3.
type cubic struct{ x0, c0, c1, c2, c3 float64 }

func (s *Solution) slopeOn(seg [2]float64) cubic {
	st := s.at(seg[0])
	q := s.intensity((seg[0] + seg[1]) / 2)
	// slope' = -bend M - shear q; M' = V; V' = -q.
	return cubic{seg[0], st.slope, -s.bend*st.moment - s.shear*q, -s.bend * st.shear / 2, s.bend * q / 6}
}

// intensity is the spread load at xi, N over the beam's length.
func (s *Solution) intensity(xi float64) float64 {
	q := 0.0
	for _, p := range s.patches {
		if xi > p.from && xi < p.to {
			q += p.force / (p.to - p.from)
		}
	}
	return q
}

func (c cubic) value(x float64) float64 {
	t := x - c.x0
	return c.c0 + t*(c.c1+t*(c.c2+t*c.c3))
}

func (c cubic) gradient(x float64) float64 {
	t := x - c.x0
	return c.c1 + t*(2*c.c2+t*3*c.c3)
}

// monotone cuts a stretch where the curvature is zero.
func (s *Solution) monotone(seg [2]float64) [][2]float64 {
	c := s.slopeOn(seg)
	ends := []float64{seg[0]}
	for _, t := range quadratic(3*c.c3, 2*c.c2, c.c1) {
		if x := seg[0] + t; x > ends[len(ends)-1] && x < seg[1] {
			ends = append(ends, x)
		}
	}
	ends = append(ends, seg[1])
	var out [][2]float64
	for i := 1; i < len(ends); i++ {
		out = append(out, [2]float64{ends[i-1], ends[i]})
	}
	return out
}

// quadratic gives the real roots of a t^2 + b t + c, rising, without
// cancellation.
func quadratic(a, b, c float64) []float64 {
	disc := b*b - 4*a*c
	if disc < 0 || (a == 0 && b == 0) {
		return nil
	}
	h := -(b + math.Copysign(math.Sqrt(disc), b)) / 2
	var out []float64
	if a != 0 {
		out = append(out, h/a)
	}
	if h != 0 {
		out = append(out, c/h)
	}
	if len(out) == 2 && out[0] > out[1] {
		out[0], out[1] = out[1], out[0]
	}
	return out
}

// flat finds where the slope is zero in lo..hi, in which it is monotone.
func (s *Solution) flat(lo, hi float64, seg [2]float64) (float64, bool) {
	c := s.slopeOn(seg)
	at, end := c.value(lo), c.value(hi)
	if at == 0 {
		return lo, true
	}
	if at*end > 0 {
		return 0, false
	}
	x := (lo + hi) / 2
	for range 200 {
		v := c.value(x)
		if v*at > 0 {
			lo = x
		} else {
			hi = x
		}
		next := x - v/c.gradient(x)
		if !(next > lo && next < hi) {
			next = (lo + hi) / 2
		}
		if math.Abs(next-x) <= 1e-16 || hi-lo <= 1e-16 {
			return next, true
		}
		x = next
	}
	return x, true
}

// MaxMoment is the bending moment of greatest size (N.mm, with its sign) and
// where it is.
func (s *Solution) MaxMoment() Extreme {
	best := Extreme{At: s.beam.From}
	try := func(xi, m float64) {
		if math.Abs(m) > math.Abs(best.Value) {
			best = Extreme{At: s.place(xi), Value: m}
		}
	}
	for _, seg := range s.segments(0, 1) {
		st := s.at(seg[0])
		q := s.intensity((seg[0] + seg[1]) / 2)
		on := func(t float64) float64 { return st.moment + t*(st.shear-q*t/2) }
		l := seg[1] - seg[0]
		try(seg[0], on(0)*s.beam.Length)
		try(seg[1], on(l)*s.beam.Length)
		if q != 0 {
			if t := st.shear / q; t > 0 && t < l {
				try(seg[0]+t, on(t)*s.beam.Length)
			}
		}
	}
	return best
}
