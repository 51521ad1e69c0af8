package main

import (
	"context"
	"fmt"
	"os"
	"runtime"
	"time"

	"golang.org/x/sync/errgroup"

	"gaugelog/analysis/glance"
	"gaugelog/config"
	"gaugelog/ingest/fetch"
	"gaugelog/ingest/segment"
)

// sendingWithin is how old the last reading on a server may be for a run to
// count as one that is being sent.
const sendingWithin = 10 * time.Minute

// askServer sums up every run that a server holds.
func askServer(ctx context.Context, address string, f rigsFlags) ([]rigRow, error) {
	token, err := tokenOf(f.tokenFile)
	if err != nil {
		return nil, err
	}
	source, err := fetch.ParseSource(address, token, f.plain)
	if err != nil {
		return nil, wrong(err, "write it as 'http://host:8086/query?db=lab' or 'http://host:8428/api/v1/export'")
	}
	defer source.Close()
	given := map[string]*config.Rig{}
	for _, file := range f.rigs {
		text, err := os.ReadFile(file)
		if err != nil {
			return nil, wrong(err, "name a rig file")
		}
		rig, err := config.ParseBrief(file, text)
		if err != nil {
			return nil, err
		}
		given[rig.Specimen.Name] = rig
	}
	list, err := source.Standings(ctx)
	if err != nil {
		return nil, wrongInput(err)
	}
	if len(list) == 0 {
		return nil, wrongf("see that the address names the right database, and that a run was forwarded to it", "%s holds no run", source)
	}
	rows := make([]rigRow, len(list))
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(2 * runtime.GOMAXPROCS(0))
	for i, st := range list {
		group.Go(func() error { return rows[i].ask(ctx, source, st, given[st.Rig], time.Now()) })
	}
	return rows, group.Wait()
}

// ask fills in the row of a run that a server holds. given is its rig file,
// nil where none was named; what was forwarded of it does as well.
func (r *rigRow) ask(ctx context.Context, source *fetch.Source, st *fetch.Standing, given *config.Rig, now time.Time) error {
	rig := given
	if rig == nil && st.Brief != "" {
		var err error
		if rig, err = config.ParseBrief("rig file of "+st.Run, []byte(st.Brief)); err != nil {
			return fmt.Errorf("%s: %w", source, err)
		}
	}
	in := glance.Input{Marks: st.Marks, Events: st.Events, First: st.First, Last: st.Last,
		Medians: func(gauges []string, spans []segment.Interval) ([]map[string]glance.Median, error) {
			found, err := source.Medians(ctx, st.Run, spans)
			return middles(found, gauges, spans, st), err
		}}
	s, err := glance.Sum(rig, in)
	if err != nil {
		return wrongInput(err)
	}
	*r = rigRow{Server: source.String(), Run: st.Run, SenseKnown: rig != nil}
	r.fill(s)
	r.Specimen = st.Rig
	switch {
	case s.Ended:
		r.State = "ended"
	case now.Sub(time.Unix(0, s.Last)) < sendingWithin:
		r.State = "sending"
	default:
		r.State = "silent"
	}
	return nil
}

// middles gives a server's medians the middle of their span, within the run, as
// their instant: no server works out the median of instants.
func middles(found []map[string]float64, gauges []string, spans []segment.Interval, st *fetch.Standing) []map[string]glance.Median {
	wanted := map[string]bool{}
	for _, g := range gauges {
		wanted[g] = true
	}
	out := make([]map[string]glance.Median, len(found))
	for i := range found {
		out[i] = map[string]glance.Median{}
		from, to := max(spans[i].From, st.First), min(spans[i].To, st.Last)
		for g, mm := range found[i] {
			if gauges == nil || wanted[g] {
				out[i][g] = glance.Median{MM: mm, At: from + (to-from)/2}
			}
		}
	}
	return out
}
