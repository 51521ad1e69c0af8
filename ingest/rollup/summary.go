package rollup

import (
	"math"
	"slices"
)

// Summary is what one stretch of a run's readings adds to a book: bins of ten
// minutes, and the whole stretch in bins no wider than the run's will ever be
// again. Books made of summaries are those made of the readings themselves but
// for Recent and Since, which need the readings (or, for Since, ten minutes that
// are short against the time since the origin; see Book.AddSince).
type Summary struct {
	// Names are the channels' in the order of Series.
	Names  []string
	Series []SummarySeries
	// Until is the latest reading's instant, ns since 1970 UTC; 0: there is none.
	Until int64
}

// SummarySeries is one channel of a summary.
type SummarySeries struct {
	// Tens are the bins of ten minutes that hold readings, in order.
	Tens  []Bin
	Whole Whole
}

// TenMinutes is the width of a summary's bins, ns.
const TenMinutes = dayWidth

// NewSummary makes an empty summary of readings that follow those of a book.
func NewSummary(b *Book) *Summary {
	s := &Summary{Names: b.Names(), Series: make([]SummarySeries, len(b.Series))}
	for i := range s.Series {
		s.Series[i].Whole.Width = b.Series[i].Whole.Width
	}
	return s
}

// Add takes one reading of channel i; one that is no number is left out.
func (s *Summary) Add(i int, t int64, v float64) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return
	}
	c := &s.Series[i]
	bin := one(floor(t, dayWidth), t, v)
	at := len(c.Tens)
	for at > 0 && c.Tens[at-1].ID > bin.ID {
		at--
	}
	if at > 0 && c.Tens[at-1].ID == bin.ID {
		c.Tens[at-1].merge(&bin)
	} else {
		c.Tens = slices.Insert(c.Tens, at, bin)
	}
	c.Whole.put(one(0, t, v))
	s.Until = max(s.Until, t)
}

// AddSummary takes in a stretch of readings that b does not hold, all but what
// needs the readings themselves. ErrOther: it is of other channels.
func (b *Book) AddSummary(s *Summary) error {
	if !slices.Equal(b.Names(), s.Names) || len(s.Series) != len(b.Series) {
		return ErrOther
	}
	for i := range b.Series {
		for _, bin := range s.Series[i].Tens {
			b.Series[i].Days.put(bin)
		}
		b.Series[i].Whole.merge(&s.Series[i].Whole)
	}
	b.Until = max(b.Until, s.Until)
	return nil
}

// AddSince takes the summary's bins of ten minutes that begin at the instant
// from or later into the bins since the origin, each as a whole.
func (b *Book) AddSince(s *Summary, from int64) {
	for i := range min(len(b.Series), len(s.Series)) {
		for _, bin := range s.Series[i].Tens {
			if bin.ID*dayWidth >= from {
				b.addSince(&b.Series[i], bin)
			}
		}
	}
}

// AddRecentOnly takes a reading that b holds already, from a summary, into the
// bins of the last twenty minutes.
func (b *Book) AddRecentOnly(i int, t int64, v float64) {
	r := &b.Series[i].Recent
	r.put(one(floor(t, r.Width), t, v))
}

// AddSinceOnly takes a reading that b holds already, from a summary, into the
// bins since the origin.
func (b *Book) AddSinceOnly(i int, t int64, v float64) { b.addSince(&b.Series[i], one(0, t, v)) }

// RecentFor is how far back Recent reaches, ns.
const RecentFor = recentBins * second
