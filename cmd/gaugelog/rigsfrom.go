package main

import (
	"context"
	"fmt"
	"os"
	"slices"
	"time"

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
	return standingRows(ctx, source, list, given)
}

// standingRows sums up runs that a server holds. given are rig files by the
// name of their specimen; what was forwarded of one does as well. What medians
// a row needs is found out first, so that all can be asked for together.
func standingRows(ctx context.Context, source *fetch.Source, list []*fetch.Standing, given map[string]*config.Rig) ([]rigRow, error) {
	rigs, asks := make([]*config.Rig, len(list)), make([]fetch.Ask, len(list))
	for i, st := range list {
		asks[i].Run = st.Run
		if rigs[i] = given[st.Rig]; rigs[i] == nil && st.Brief != "" {
			var err error
			if rigs[i], err = config.ParseBrief("rig file of "+st.Run, []byte(st.Brief)); err != nil {
				return nil, fmt.Errorf("%s: %w", source, err)
			}
		}
		if _, err := glance.Sum(rigs[i], inputOf(st, func(_ []string, spans []segment.Interval) ([]map[string]glance.Median, error) {
			asks[i].Spans = spans
			return make([]map[string]glance.Median, len(spans)), nil
		})); err != nil {
			return nil, wrongInput(err)
		}
	}
	found, err := source.Medians(ctx, widened(asks))
	if err != nil {
		return nil, wrongInput(err)
	}
	rows := make([]rigRow, len(list))
	for i, st := range list {
		s, err := glance.Sum(rigs[i], inputOf(st, func(gauges []string, spans []segment.Interval) ([]map[string]glance.Median, error) {
			return middles(found[i], gauges, spans, st), nil
		}))
		if err != nil {
			return nil, wrongInput(err)
		}
		rows[i] = rigRow{Server: source.String(), Run: st.Run, SenseKnown: rigs[i] != nil}
		rows[i].fill(s)
		rows[i].Specimen = st.Rig
		rows[i].State = stateOf(s, time.Now())
	}
	return rows, nil
}

func inputOf(st *fetch.Standing, medians func([]string, []segment.Interval) ([]map[string]glance.Median, error)) glance.Input {
	return glance.Input{Marks: st.Marks, Events: st.Events, First: st.First, Last: st.Last, Medians: medians}
}

// stateOf is how a run on a server stands.
func stateOf(s *glance.Summary, now time.Time) string {
	switch {
	case s.Ended:
		return "ended"
	case now.Sub(time.Unix(0, s.Last)) < sendingWithin:
		return "sending"
	}
	return "silent"
}

// grid is what spans of several runs are widened to, so that they can be asked
// for together.
const grid = int64(time.Minute)

// widened widens spans of ten minutes by up to a minute at either end where
// several runs then share them: rigs that are being recorded all end now.
func widened(asks []fetch.Ask) []fetch.Ask {
	wide := func(s segment.Interval) segment.Interval {
		if s.To-s.From < 9*grid {
			return s // a load was hung not long before it
		}
		return segment.Interval{From: s.From / grid * grid, To: (s.To + grid - 1) / grid * grid}
	}
	alike := map[segment.Interval]int{}
	for _, a := range asks {
		for _, s := range a.Spans[:min(2, len(a.Spans))] { // the third ends just before a load was hung
			alike[wide(s)]++
		}
	}
	out := make([]fetch.Ask, len(asks))
	for i, a := range asks {
		out[i] = fetch.Ask{Run: a.Run, Spans: slices.Clone(a.Spans)}
		for j := range min(2, len(a.Spans)) {
			if w := wide(a.Spans[j]); alike[w] > 2 {
				out[i].Spans[j] = w
			}
		}
	}
	return out
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
