package creep

import "math"

// mostBins is the greatest number of bins of one series a fit takes. A year
// at 4000 has them two hours apart at most, which still follows a day.
const mostBins = 4000

// compact merges neighbouring bins of every series that has too many. Input
// given by value; the caller's slices are not changed.
func (in *Input) compact() {
	series := make([]Series, len(in.Series))
	for i := range in.Series {
		series[i] = in.Series[i].compacted(mostBins)
	}
	in.Series = series
}

// compacted merges bins by weighted means so that about most are left: the
// early ones, close together in time, stay; none spans a change of load.
func (s *Series) compacted(most int) Series {
	out := *s
	n := len(s.TimeH)
	if n <= most {
		return out
	}
	width := 2 * (s.TimeH[n-1] - s.TimeH[0]) / float64(most)
	out.TimeH, out.SagMM, out.U, out.N = nil, nil, nil, nil
	for i := 0; i < n; {
		age, next := s.since(s.TimeH[i])
		end := min(s.TimeH[i]+min(width, 0.05*age), next)
		var t, w, y float64
		count, bins := 0, 0.0
		for ; i < n && (bins == 0 || s.TimeH[i] < end); i++ {
			q := 1 / (s.U[i] * s.U[i])
			t, y, w = t+q*s.TimeH[i], y+q*s.SagMM[i], w+q
			bins++
			if s.N != nil {
				count += s.N[i]
			} else {
				count++
			}
		}
		out.TimeH, out.SagMM = append(out.TimeH, t/w), append(out.SagMM, y/w)
		out.U, out.N = append(out.U, math.Sqrt(1/w)), append(out.N, count)
	}
	return out
}

// since returns the time since the last change of load before t, and the
// instant of the next.
func (s *Series) since(t float64) (age, next float64) {
	age, next = math.Inf(1), math.Inf(1)
	for _, c := range s.Changes {
		if c.AtH <= t {
			age = t - c.AtH
		} else {
			next = min(next, c.AtH)
		}
	}
	return age, next
}
