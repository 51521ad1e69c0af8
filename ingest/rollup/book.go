package rollup

import (
	"errors"
	"math"
	"slices"
)

// Figures of the sets of bins.
const (
	second      = int64(1e9)
	recentBins  = 1200         // of a second: twenty minutes
	dayWidth    = 600 * second // ten minutes
	dayBins     = 8 * 144      // eight days
	perDecade   = 24           // bins per factor of ten in time since a load change
	decades     = 9            // from one second to thirty years
	sinceLength = perDecade*decades + 1
)

// Series is one channel's bins.
type Series struct {
	Name   string
	Recent Ring  // the last twenty minutes by the second
	Days   Ring  // the last eight days by ten minutes
	Whole  Whole // the whole run
	// Since holds the readings after the book's origin: bin i covers the times
	// from 10^(i/24) s to 10^((i+1)/24) s after it; the first also what is earlier.
	Since []Bin
}

// Near returns the mean of the readings around the instant t (ns since 1970
// UTC) from the finest bins that still hold it, and their middle instant;
// false where there are none within ten minutes.
func (s *Series) Near(t int64) (mean float64, at int64, ok bool) {
	for _, r := range []*Ring{&s.Recent, &s.Days} {
		if b, ok := r.Near(t); ok {
			return b.Mean(), b.Time(), true
		}
	}
	return 0, 0, false
}

// Book holds the bins of all channels of one run. It is for one goroutine.
type Book struct {
	Series []Series
	// Origin is the instant from which Since counts, in ns since 1970 UTC;
	// 0: there is none.
	Origin int64
	// Until is the latest reading's instant, ns since 1970 UTC.
	Until int64
}

// NewBook makes an empty book for channels of the given names.
func NewBook(names ...string) *Book {
	b := &Book{Series: make([]Series, len(names))}
	for i, n := range names {
		b.Series[i] = Series{Name: n, Recent: newRing(second, recentBins), Days: newRing(dayWidth, dayBins), Whole: Whole{Width: second}}
	}
	return b
}

// Add takes one reading of channel i; one that is no number is left out.
func (b *Book) Add(i int, t int64, v float64) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return
	}
	s := &b.Series[i]
	s.Recent.put(one(floor(t, s.Recent.Width), t, v))
	s.Days.put(one(floor(t, s.Days.Width), t, v))
	s.Whole.put(one(0, t, v))
	b.addSince(s, one(0, t, v))
	b.Until = max(b.Until, t)
}

func (b *Book) addSince(s *Series, bin Bin) {
	if b.Origin == 0 || bin.FirstTime < b.Origin {
		return
	}
	if s.Since == nil {
		s.Since = make([]Bin, sinceLength)
	}
	i := sinceIndex(bin.Time() - b.Origin)
	bin.ID = int64(i)
	s.Since[i].ID = bin.ID
	s.Since[i].merge(&bin)
}

func sinceIndex(d int64) int {
	if d <= second {
		return 0
	}
	return min(int(perDecade*math.Log10(float64(d)/float64(second))), sinceLength-1)
}

// SetOrigin begins the Since bins anew at the instant t, with what the last
// twenty minutes hold of it. It says whether that is everything: false where
// readings from t on have left memory, and AddSince should bring them back.
// An origin that is set already changes nothing.
func (b *Book) SetOrigin(t int64) (whole bool) {
	if t == b.Origin {
		return true
	}
	b.Origin, whole = t, true
	for i := range b.Series {
		s := &b.Series[i]
		s.Since = nil
		if t == 0 {
			continue
		}
		for _, bin := range s.Recent.since(t) {
			b.addSince(s, bin)
		}
		// Older bins stay where readings come seldom, but not all of them.
		if held := b.Until - RecentFor + second; t < held && len(s.Whole.Bins) > 0 && s.Whole.Bins[0].FirstTime < held {
			whole = false
		}
	}
	return whole
}

// ErrOther says that a book is of other channels.
var ErrOther = errors.New("the book is of other channels")

// Merge takes in the bins of another book of the same channels whose readings
// are not in b. Its Since bins count where both have the same origin.
func (b *Book) Merge(o *Book) error {
	if !slices.Equal(b.Names(), o.Names()) {
		return ErrOther
	}
	for i := range b.Series {
		s, from := &b.Series[i], &o.Series[i]
		for _, bin := range from.Recent.Bins {
			if bin.N > 0 {
				s.Recent.put(bin)
			}
		}
		for _, bin := range from.Days.Bins {
			if bin.N > 0 {
				s.Days.put(bin)
			}
		}
		s.Whole.merge(&from.Whole)
		if b.Origin == o.Origin {
			b.mergeSince(s, from.Since)
		}
	}
	b.Until = max(b.Until, o.Until)
	return nil
}

func (b *Book) mergeSince(s *Series, bins []Bin) {
	if len(bins) == 0 {
		return
	}
	if s.Since == nil {
		s.Since = make([]Bin, sinceLength)
	}
	for i := range bins {
		if bins[i].N > 0 {
			s.Since[i].ID = int64(i)
			s.Since[i].merge(&bins[i])
		}
	}
}

// ReplaceSince puts another book's Since bins in the place of b's, where both
// have the same origin, and adds what b holds of the time after that book.
func (b *Book) ReplaceSince(o *Book) {
	if b.Origin != o.Origin || len(b.Series) != len(o.Series) {
		return
	}
	for i := range b.Series {
		s := &b.Series[i]
		s.Since = slices.Clone(o.Series[i].Since)
		for _, bin := range s.Recent.since(o.Until + 1) {
			b.addSince(s, bin)
		}
	}
}

// Names names the channels in their order.
func (b *Book) Names() []string {
	names := make([]string, len(b.Series))
	for i := range b.Series {
		names[i] = b.Series[i].Name
	}
	return names
}
