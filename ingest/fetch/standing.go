package fetch

import (
	"cmp"
	"context"
	"slices"
	"strings"

	"gaugelog/ingest/segment"
)

// Standing is what a server tells of one run without its readings being read
// back.
type Standing struct {
	// Run and Rig are the tags.
	Run, Rig string
	// First and Last bound the readings, ns since 1970 UTC.
	First, Last int64
	// Brief is what was forwarded of the rig file, see forward.Options; "" where
	// the server holds none.
	Brief string
	// Marks are loads, steps and withdrawals, Events what concerns alarms and
	// the recording's start and end; both in order of time.
	Marks, Events []segment.Record
}

// told are the kinds of events that a Standing holds.
var told = []string{"alarm-raised", "alarm-over", "started", "stopped"}

// stander is what a reader of a server tells of all its runs.
type stander interface {
	standings(ctx context.Context) ([]*Standing, error)
	// medians hands over the median of each gauge's indications in every window
	// that has one.
	medians(ctx context.Context, windows []window, take func(w int, run, gauge string, mm float64)) error
}

// Standings tells of all runs that a server holds, in order of rig and run, by
// a few queries whatever their number.
func (s *Source) Standings(ctx context.Context) ([]*Standing, error) {
	list, err := s.reader().(stander).standings(ctx)
	for _, st := range list {
		for _, l := range [][]segment.Record{st.Marks, st.Events} {
			slices.SortStableFunc(l, func(a, b segment.Record) int { return cmp.Compare(a.Time, b.Time) })
		}
	}
	slices.SortFunc(list, func(a, b *Standing) int {
		if c := strings.Compare(a.Rig, b.Rig); c != 0 {
			return c
		}
		return strings.Compare(a.Run, b.Run)
	})
	return list, err
}

// Close lets go of connections.
func (s *Source) Close() { s.client.CloseIdleConnections() }

// standings gathers what is told of runs by their tags.
type standings map[[2]string]*Standing

func (all standings) of(tags map[string]string) *Standing {
	k := [2]string{tags["rig"], tags["run"]}
	if all[k] == nil {
		all[k] = &Standing{Rig: k[0], Run: k[1]}
	}
	return all[k]
}

// put adds a mark or an event.
func (st *Standing) put(p *point) error {
	r, err := segment.RecordOf(p.segment(), p.at)
	if err != nil {
		return err
	}
	if r.Kind == segment.Event {
		st.Events = append(st.Events, r)
	} else {
		st.Marks = append(st.Marks, r)
	}
	return nil
}

// list leaves out runs without a reading.
func (all standings) list() (out []*Standing) {
	for _, st := range all {
		if st.Last != 0 {
			out = append(out, st)
		}
	}
	return out
}
