package fetch

import (
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"strconv"
	"strings"
)

const byRun = ` GROUP BY "run","rig"`

func (q *queried) standings(ctx context.Context) ([]*Standing, error) {
	all := standings{}
	for _, ask := range []struct {
		query string
		take  func(*Standing, int64, any)
	}{
		{`SELECT last("mm") FROM "indication"` + byRun, func(st *Standing, at int64, _ any) { st.Last = at }},
		{`SELECT first("mm") FROM "indication"` + byRun, func(st *Standing, at int64, _ any) { st.First = at }},
		{`SELECT last("brief") FROM "rig"` + byRun, func(st *Standing, _ int64, v any) { st.Brief, _ = v.(string) }},
	} {
		if err := q.ask(ctx, ask.query, func(s *series) error {
			for _, row := range s.Values {
				at, err := stamp(row)
				if err != nil {
					return fmt.Errorf("%s: %w", q.s, err)
				}
				ask.take(all.of(s.Tags), at, row[1])
			}
			return nil
		}); err != nil {
			return nil, err
		}
	}
	for _, m := range []string{"load", "step", "withdraw", "event"} {
		if err := q.entries(ctx, m, all); err != nil {
			return nil, err
		}
	}
	return all.list(), nil
}

// stamp is the instant of a row of two columns, time and a value.
func stamp(row []any) (int64, error) {
	if len(row) != 2 {
		return 0, fmt.Errorf("%v is no row of an instant and a value", row)
	}
	n, ok := row[0].(json.Number)
	if !ok {
		return 0, fmt.Errorf("%v is no instant", row[0])
	}
	return strconv.ParseInt(n.String(), 10, 64)
}

// entries reads all runs' marks or events of one measurement.
func (q *queried) entries(ctx context.Context, measurement string, all standings) error {
	kinds, err := q.shape(ctx, measurement)
	if err != nil || len(kinds) == 0 {
		return err
	}
	query := `SELECT * FROM "` + measurement + `"`
	if measurement == "event" {
		query += ` WHERE "kind" = '` + strings.Join(told, `' OR "kind" = '`) + `'`
	}
	var p point
	return q.ask(ctx, query+byRun, func(s *series) error {
		columns := columnsOf(s, kinds)
		for _, row := range s.Values {
			if err := p.fill(measurement, columns, row); err != nil {
				return fmt.Errorf("%s: %w", q.s, err)
			}
			if err := all.of(s.Tags).put(&p); err != nil {
				return fmt.Errorf("%s: %w", q.s, err)
			}
		}
		return nil
	})
}

func (q *queried) medians(ctx context.Context, windows []window, take func(w int, run, gauge string, mm float64)) error {
	var query strings.Builder
	for _, w := range windows {
		of, by := "", `"run",`
		if w.run != "" {
			of, by = `"run" = `+quoted(w.run)+" AND ", ""
		}
		fmt.Fprintf(&query, `SELECT median("mm") FROM "indication" WHERE %stime >= %d AND time <= %d GROUP BY %s"gauge";`, of, w.span.From, w.span.To, by)
	}
	return q.askAll(ctx, query.String(), len(windows), func(s *series) error {
		for _, row := range s.Values {
			if len(row) != 2 || s.statement < 0 || s.statement >= len(windows) {
				return fmt.Errorf("%s: %v of statement %d was not asked for", q.s, row, s.statement)
			}
			n, ok := row[1].(json.Number)
			if !ok {
				continue // no reading in it
			}
			v, err := n.Float64()
			if err != nil {
				return fmt.Errorf("%s: %w", q.s, err)
			}
			take(s.statement, cmp.Or(windows[s.statement].run, s.Tags["run"]), s.Tags["gauge"], v)
		}
		return nil
	})
}
