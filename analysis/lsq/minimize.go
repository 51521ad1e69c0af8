package lsq

import "math"

// Minimize returns where f is least on [lower, upper]: a scan of points
// equally spaced (at least 3), then golden sections about the best until the
// bracket is within tolerance times the whole interval. f may return +Inf
// where it is not defined. With several minima the one the scan sees lowest
// is found.
func Minimize(f func(float64) float64, lower, upper float64, points int, tolerance float64) float64 {
	points = max(points, 3)
	at := func(i int) float64 { return lower + (upper-lower)*float64(i)/float64(points-1) }
	best, value := 0, math.Inf(1)
	for i := range points {
		if v := f(at(i)); v < value {
			best, value = i, v
		}
	}
	where := at(best)
	a, b := at(max(best-1, 0)), at(min(best+1, points-1))
	const golden = 0.6180339887498949
	x, y := b-golden*(b-a), a+golden*(b-a)
	fx, fy := f(x), f(y)
	for b-a > tolerance*(upper-lower) {
		if fx <= fy {
			b, y, fy = y, x, fx
			x = b - golden*(b-a)
			fx = f(x)
		} else {
			a, x, fx = x, y, fy
			y = a + golden*(b-a)
			fy = f(y)
		}
	}
	for _, c := range []struct{ x, v float64 }{{x, fx}, {y, fy}} {
		if c.v < value {
			where, value = c.x, c.v
		}
	}
	return where
}
