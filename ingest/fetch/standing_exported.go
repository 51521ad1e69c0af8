package fetch

import (
	"bufio"
	"cmp"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"net/url"
	"strconv"
	"strings"
	"time"
)

// vector is an answer to an instant query.
type vector struct {
	Data struct {
		Result []struct {
			Metric map[string]string `json:"metric"`
			Value  [2]any            `json:"value"`
		} `json:"result"`
	} `json:"data"`
}

// ask runs an instant query at a time, ms, and hands over each series' value.
func (e *exported) ask(ctx context.Context, query string, at int64, take func(metric map[string]string, v float64)) error {
	var a vector
	if err := e.json(ctx, "/api/v1/query", url.Values{"query": {query}, "time": {seconds(at)}, "nocache": {"1"}}, &a); err != nil {
		return err
	}
	for _, r := range a.Data.Result {
		v, err := strconv.ParseFloat(fmt.Sprint(r.Value[1]), 64)
		if err != nil {
			return fmt.Errorf("%s: %w", e.s, err)
		}
		take(r.Metric, v)
	}
	return nil
}

func (e *exported) standings(ctx context.Context) ([]*Standing, error) {
	all := standings{}
	ahead := time.Now().Add(24 * time.Hour).UnixMilli() // and fifty years back, as in extent
	ns := func(s float64) int64 { return int64(math.Round(s*1e3)) * 1e6 }
	if err := e.ask(ctx, `max(tlast_over_time(indication_mm[50y])) by (run,rig)`, ahead, func(m map[string]string, v float64) {
		all.of(m).Last = ns(v)
	}); err != nil {
		return nil, err
	}
	if err := e.ask(ctx, `min(tfirst_over_time(indication_mm[50y])) by (run,rig)`, ahead, func(m map[string]string, v float64) {
		all.of(m).First = ns(v)
	}); err != nil {
		return nil, err
	}
	for _, m := range []struct{ measurement, match string }{
		{"load", `{__name__=~"load_.*"}`}, {"withdraw", `{__name__=~"withdraw_.*"}`}, {"step", `{__name__=~"step_.*"}`},
		{"event", `{__name__=~"event_.*",kind=~"` + strings.Join(told, "|") + `"}`},
	} {
		if err := e.entries(ctx, m.measurement, m.match, all); err != nil {
			return nil, err
		}
	}
	return all.list(), nil
}

// entries reads all runs' marks or events of one measurement.
func (e *exported) entries(ctx context.Context, measurement, match string, all standings) error {
	body, err := e.s.get(ctx, exportPath, exportPath, url.Values{"match[]": {match}, "start": {"2000-01-01T00:00:00Z"}, "reduce_mem_usage": {"1"}})
	if err != nil {
		return err
	}
	defer body.Close()
	byRun, n := map[*Standing]*joiner{}, 0
	for d := json.NewDecoder(bufio.NewReader(body)); ; {
		var line exportLine
		if err := d.Decode(&line); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			return fmt.Errorf("%s: the export breaks off or is none: %w", e.s, err)
		}
		if n += len(line.Values); n > mostEntries {
			return fmt.Errorf("%s: more than %d marks and events, which no rigs hold", e.s, mostEntries)
		}
		st := all.of(line.Metric)
		if byRun[st] == nil {
			byRun[st] = &joiner{measurement: measurement, points: map[string]*point{}, from: 0, to: math.MaxInt64}
		}
		if err := byRun[st].add(line.Metric, line.Values, line.Timestamps); err != nil {
			return fmt.Errorf("%s: %w", e.s, err)
		}
	}
	for st, j := range byRun {
		for _, p := range j.sorted() {
			if err := st.put(p); err != nil {
				return fmt.Errorf("%s: %w", e.s, err)
			}
		}
	}
	return nil
}

func (e *exported) medians(ctx context.Context, windows []window, take func(w int, run, gauge string, mm float64)) error {
	for i, w := range windows {
		of := ""
		if w.run != "" {
			of = "{run=" + strconv.Quote(w.run) + "}"
		}
		from, to := w.span.From/1e6, w.span.To/1e6 // the server's window is open at its beginning
		query := fmt.Sprintf(`quantile_over_time(0.5, indication_mm%s[%dms])`, of, to-from+1)
		if err := e.ask(ctx, query, to, func(m map[string]string, v float64) { take(i, cmp.Or(w.run, m["run"]), m["gauge"], v) }); err != nil {
			return err
		}
	}
	return nil
}
