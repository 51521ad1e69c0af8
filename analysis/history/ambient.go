package history

import (
	"math"

	"gaugelog/ingest/segment"
)

// probe gathers a probe's readings into means of equal stretches.
type probe struct {
	width      int64
	from       int64
	sumC, sumH float64
	nC, nH, n  int
	sumT       float64
	out        []AmbientSample
}

func (p *probe) add(rec *segment.Record) {
	if rec.Point == nil {
		return
	}
	if from := rec.Time - mod(rec.Time, p.width); p.n > 0 && from != p.from {
		p.finish()
	}
	if p.n == 0 {
		p.from = rec.Time - mod(rec.Time, p.width)
	}
	p.n++
	p.sumT += float64(rec.Time-p.from) / 1e9
	if v, ok := number(rec.Point, "celsius"); ok {
		p.sumC, p.nC = p.sumC+v, p.nC+1
	}
	if v, ok := number(rec.Point, "humidity_percent"); ok {
		p.sumH, p.nH = p.sumH+v, p.nH+1
	}
}

func (p *probe) finish() {
	if p.n == 0 {
		return
	}
	s := AmbientSample{Time: p.from + int64(p.sumT/float64(p.n)*1e9), Celsius: math.NaN(), HumidityPercent: math.NaN()}
	if p.nC > 0 {
		s.Celsius = p.sumC / float64(p.nC)
	}
	if p.nH > 0 {
		s.HumidityPercent = p.sumH / float64(p.nH)
	}
	p.out = append(p.out, s)
	p.sumC, p.sumH, p.nC, p.nH, p.n, p.sumT = 0, 0, 0, 0, 0, 0
}
