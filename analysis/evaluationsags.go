package analysis

import (
	"gaugelog/analysis/evaluate"
	"gaugelog/analysis/history"
)

// given turns a Q into a fact; nil stays nil.
func given(q *Q) *evaluate.Quantity {
	if q == nil {
		return nil
	}
	f := evaluate.Measured(q.Value, 0)
	if q.U != nil {
		f.U = *q.U
	}
	return f
}

// sags fills the creep gauge's figures from the creep section, where a law
// was found, else from the step's.
func (b *factsBuilder) sags() {
	c, out := &b.r.Creep, b.out
	out.InitialAfter = evaluate.Exactly(c.InitialAfterS)
	for i := range c.After {
		a := &c.After[i]
		out.Sag = append(out.Sag, evaluate.Reading{AfterS: a.AfterS, Quantity: *given(&a.Sag), Modelled: a.Modelled})
		if a.Modelled {
			continue
		}
		if sameTime(a.AfterS, c.InitialAfterS) {
			out.InitialSag = given(&a.Sag)
		}
		if out.Duration != nil && sameTime(a.AfterS, out.Duration.Value) {
			out.EndSag = given(&a.Sag)
		}
	}
	if b.gauge >= 0 && b.step < len(b.r.Steps) && b.gauge < len(b.r.Steps[b.step].Gauges) {
		b.stepSags(&b.r.Steps[b.step].Gauges[b.gauge])
	}
	if b.step < len(b.r.Steps) && b.r.Steps[b.step].Largest != nil {
		out.GreatestSag = given(&b.r.Steps[b.step].Largest.Sag)
	}
	if out.RecoveryDuration != nil {
		for i := range c.Recovery {
			v := &c.Recovery[i]
			out.Recovered = append(out.Recovered, evaluate.Reading{AfterS: v.AfterS, Quantity: *given(&v.Recovered)})
		}
	}
	out.PermanentSet = given(c.PermanentSet)
	for i := range c.Forecast {
		v := &c.Forecast[i]
		if v.Sag != nil && v.Refused == "" && (out.ForecastAfter == nil || v.AfterS > out.ForecastAfter.Value) {
			out.ForecastSag, out.ForecastAfter = given(v.Sag), evaluate.Exactly(v.AfterS)
		}
	}
}

// stepSags stands in where no creep law was found.
func (b *factsBuilder) stepSags(g *StepGauge) {
	if b.out.InitialSag == nil {
		b.out.InitialSag = given(g.Initial)
	}
	if b.out.EndSag == nil {
		b.out.EndSag = given(g.Final)
	}
	if len(b.out.Sag) > 0 {
		return
	}
	for i := range g.SagAt {
		b.out.Sag = append(b.out.Sag, evaluate.Reading{AfterS: g.SagAt[i].AfterS, Quantity: *given(&g.SagAt[i].Sag)})
	}
	if g.Initial != nil {
		b.out.Sag = append(b.out.Sag, evaluate.Reading{AfterS: b.out.InitialAfter.Value, Quantity: *given(g.Initial)})
	}
}

// finest is the tolerance below which single readings are looked up; above
// it the bins' mean instants (bins are at most ten minutes wide) will do.
const finest = 600.0

// readings fills when the creep gauge was really read near each moment.
func (b *factsBuilder) readings(moments []evaluate.Moment, full, end int64) error {
	if b.gauge < 0 {
		return nil
	}
	bins := b.h.Bins(b.gauge)
	for _, m := range moments {
		at, tolerance := full+int64(m.AfterS*1e9), int64(m.ToleranceS*1e9)
		if tolerance <= 0 || at-tolerance > end {
			continue
		}
		var times []int64
		if m.ToleranceS < finest {
			samples, err := b.h.Raw(b.gauge, max(full, at-tolerance), min(end, at+tolerance))
			if err != nil {
				return err
			}
			times = instantsOf(samples)
		} else {
			for _, bin := range bins {
				if bin.Time >= full && bin.Time <= end {
					times = append(times, bin.Time)
				}
			}
		}
		if t, ok := nearest(times, at); ok {
			b.out.ReadAt = append(b.out.ReadAt, seconds(t-full))
		}
	}
	return nil
}

func instantsOf(samples []history.Sample) []int64 {
	out := make([]int64, len(samples))
	for i, s := range samples {
		out[i] = s.Time
	}
	return out
}

// nearest is the instant nearest to at; false for none.
func nearest(times []int64, at int64) (best int64, ok bool) {
	for _, t := range times {
		if !ok || max(t-at, at-t) < max(best-at, at-best) {
			best, ok = t, true
		}
	}
	return best, ok
}
