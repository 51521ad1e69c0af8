package past

import (
	"context"
	"errors"
	"io"
	"log/slog"
	"sync"
	"time"

	"gaugelog/ingest/rollup"
	"gaugelog/ingest/segment"
)

// Past reads the past of one run. Its methods may be called from any goroutine;
// they take turns.
type Past struct {
	FS       segment.FS
	Channels *Channels
	// Keep lets it write summaries: for the recorder of the run alone.
	Keep bool
	// Gentle leaves as much time to others as it takes for itself while it reads
	// segments that have no summary.
	Gentle bool
	// Log takes what goes wrong without harm; nil: nobody is told.
	Log *slog.Logger

	mu     sync.Mutex
	widths *rollup.Book    // empty, of the widths that the run's bins had last
	done   map[string]bool // segments that have a summary, or get none now
}

// Bounds of what is read for the bins since the origin: from here on bins of ten
// minutes do, being an eighth of a bin wide (24 bins per factor of ten), and where
// readings come fast from where this many were read.
const (
	sinceFor  = int64(14 * time.Hour)
	sinceMost = 2_000_000
)

// Book gives the bins of everything recorded before an instant (ns since 1970
// UTC, exclusive), with those since an origin (0: none). Segments without a
// summary are read, and get theirs where the Past keeps them. With an error the
// book holds what was read up to there.
func (p *Past) Book(ctx context.Context, before, origin int64) (*rollup.Book, error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	book := rollup.NewBook(p.Channels.Names()...)
	book.SetOrigin(origin)
	cut, err := p.addSegments(ctx, book, before)
	p.remember(book)
	if err != nil || book.Until == 0 {
		return book, err
	}
	if err := p.read(ctx, max(book.Until-rollup.RecentFor, 0), before-1, book.AddRecentOnly); err != nil {
		return book, err
	}
	if origin != 0 {
		err = p.read(ctx, origin, min(cut, before)-1, book.AddSinceOnly)
	}
	return book, err
}

// addSegments adds the summaries of all segments, and gives the instant from
// which on they stand in the bins since the origin.
func (p *Past) addSegments(ctx context.Context, book *rollup.Book, before int64) (cut int64, err error) {
	folder, err := segment.OpenFolder(p.FS)
	if err != nil {
		return 0, err
	}
	sums := p.sums()
	since := since{origin: book.Origin, cut: upTo(book.Origin + sinceFor)}
	for _, part := range folder.Parts() {
		of, closed := keyOf(part, sums)
		var s *rollup.Summary
		if closed {
			s = p.load(part, of)
		}
		if s == nil || s.Until >= before {
			var whole bool
			var failed error
			s, whole, failed = p.summarise(ctx, folder, part, book, before)
			err = errors.Join(err, failed) // what lies behind it is shown
			if closed && whole {
				p.store(part, of, s)
			}
		}
		if err := book.AddSummary(s); err != nil {
			panic("past: " + err.Error()) // both have the channels of p
		}
		if ctx.Err() != nil {
			return since.cut, ctx.Err()
		}
		if book.Origin != 0 {
			since.count(s)
			book.AddSince(s, since.cut)
		}
	}
	return since.cut, err
}

// since finds out from where on bins of ten minutes stand for readings.
type since struct {
	origin, cut int64
	n           int64
}

// upTo is the next instant at which a bin of ten minutes begins.
func upTo(t int64) int64 { return (t + rollup.TenMinutes - 1) / rollup.TenMinutes * rollup.TenMinutes }

func (s *since) count(of *rollup.Summary) {
	for i := range of.Series {
		for _, b := range of.Series[i].Tens {
			if b.FirstTime < s.origin || b.ID*rollup.TenMinutes >= s.cut {
				continue
			}
			if s.n += b.N; s.n > sinceMost {
				s.cut = (b.ID + 1) * rollup.TenMinutes
			}
		}
	}
}

// summarise reads a segment, as far as it lies before an instant; whole where it
// does so to its end and nothing failed.
func (p *Past) summarise(ctx context.Context, folder *segment.Folder, part segment.Part, book *rollup.Book, before int64) (s *rollup.Summary, whole bool, err error) {
	s, whole = rollup.NewSummary(book), true
	tape, err := folder.Tape(part.Name, 0)
	if err != nil {
		return s, false, err
	}
	defer tape.Close()
	var numbers []int
	for ctx.Err() == nil {
		began := time.Now()
		b, err := tape.Next()
		if errors.Is(err, io.EOF) {
			return s, whole, nil
		}
		if err != nil {
			return s, false, err
		}
		numbers = p.Channels.numbers(tape.Gauges(), numbers)
		p.Channels.batch(b.Batch, numbers, func(channel int, t int64, v float64) {
			if t < before {
				s.Add(channel, t, v)
			} else {
				whole = false
			}
		})
		p.pause(ctx, time.Since(began))
	}
	return s, false, ctx.Err()
}

// pause lets others go on.
func (p *Past) pause(ctx context.Context, took time.Duration) {
	if !p.Gentle {
		return
	}
	timer := time.NewTimer(took)
	defer timer.Stop()
	select {
	case <-timer.C:
	case <-ctx.Done():
	}
}

// Readings hands over the readings between two instants, both inclusive, in the
// order in which they lie in the folder.
func (p *Past) Readings(ctx context.Context, from, to int64, take func(channel int, t int64, v float64)) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	return p.read(ctx, from, to, take)
}

func (p *Past) read(ctx context.Context, from, to int64, take func(channel int, t int64, v float64)) error {
	if to < from {
		return nil
	}
	folder, err := segment.OpenFolder(p.FS)
	if err != nil {
		return err
	}
	// One worker: the recording beside it goes first.
	r := folder.Read(segment.ReadOptions{Workers: 1, From: from, To: to})
	defer r.Close()
	var numbers []int
	for ctx.Err() == nil {
		b, err := r.Next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		numbers = p.Channels.numbers(r.Gauges(), numbers)
		p.Channels.batch(b, numbers, take)
	}
	return ctx.Err()
}
