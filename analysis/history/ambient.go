package history

import (
	"math"
	"slices"

	"gaugelog/ingest/segment"
)

// probe gathers a probe's readings into means of equal stretches, in whatever
// order they come.
type probe struct {
	width int64
	cells []ambientCell // in order of from
	out   []AmbientSample
}

// ambientCell is one stretch.
type ambientCell struct {
	from       int64
	sumC, sumH float64
	nC, nH, n  int64
	sumT       float64 // seconds after from
}

func (p *probe) add(rec *segment.Record) {
	if rec.Point == nil {
		return
	}
	c := p.cell(rec.Time - mod(rec.Time, p.width))
	c.n++
	c.sumT += float64(rec.Time-c.from) / 1e9
	if v, ok := number(rec.Point, "celsius"); ok {
		c.sumC, c.nC = c.sumC+v, c.nC+1
	}
	if v, ok := number(rec.Point, "humidity_percent"); ok {
		c.sumH, c.nH = c.sumH+v, c.nH+1
	}
}

// cell finds the stretch that begins at from, from the end backward: late
// readings are few and not very late.
func (p *probe) cell(from int64) *ambientCell {
	i := len(p.cells)
	for i > 0 && p.cells[i-1].from > from {
		i--
	}
	if i == 0 || p.cells[i-1].from != from {
		p.cells = slices.Insert(p.cells, i, ambientCell{from: from})
		return &p.cells[i]
	}
	return &p.cells[i-1]
}

func (p *probe) finish() {
	p.out = make([]AmbientSample, 0, len(p.cells))
	for _, c := range p.cells {
		s := AmbientSample{Time: c.from + int64(c.sumT/float64(c.n)*1e9), Celsius: math.NaN(), HumidityPercent: math.NaN()}
		if c.nC > 0 {
			s.Celsius = c.sumC / float64(c.nC)
		}
		if c.nH > 0 {
			s.HumidityPercent = c.sumH / float64(c.nH)
		}
		p.out = append(p.out, s)
	}
	p.cells = nil
}
