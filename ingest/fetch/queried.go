package fetch

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/url"
	"slices"
	"strconv"
	"strings"
)

// queried reads by InfluxQL over HTTP.
type queried struct{ s *Source }

func (q *queried) loses() string { return "" }

// series is one table of an answer.
type series struct {
	Tags      map[string]string `json:"tags"`
	statement int               // of which it answers, from 0
	Columns   []string          `json:"columns"`
	Values    [][]any           `json:"values"`
	Partial   bool              `json:"partial"`
}

// answer is one piece of a chunked answer.
type answer struct {
	Results []struct {
		Statement int      `json:"statement_id"`
		Series    []series `json:"series"`
		Error     string   `json:"error"`
		Partial   bool     `json:"partial"`
	} `json:"results"`
	Error string `json:"error"`
}

// ask runs a query and hands over its tables piece by piece. A piece says
// whether more follow, so that an answer cut off between two pieces is known
// for one even where whoever stands between ends it properly.
func (q *queried) ask(ctx context.Context, query string, take func(*series) error) error {
	return q.askAll(ctx, query, 1, take)
}

// askAll does so with a number of statements, each of which is answered.
func (q *queried) askAll(ctx context.Context, query string, statements int, take func(*series) error) error {
	body, err := q.s.get(ctx, "", "", url.Values{"q": {query}, "epoch": {"ns"}, "chunked": {"true"}, "chunk_size": {"10000"}})
	if err != nil {
		return err
	}
	defer body.Close()
	d := json.NewDecoder(body)
	d.UseNumber()
	answered := 0
	for more := true; ; {
		var a answer
		if err := d.Decode(&a); errors.Is(err, io.EOF) && !more && answered == statements {
			return nil
		} else if err != nil {
			return fmt.Errorf("%s: the answer to %q breaks off or is no answer of such a server: %w", q.s, query, err)
		}
		if a.Error != "" {
			return q.s.says(a.Error)
		}
		more = len(a.Results) == 0
		for i := range a.Results {
			if e := a.Results[i].Error; e != "" {
				return q.s.says(e)
			}
			more = more || a.Results[i].Partial
			answered = max(answered, a.Results[i].Statement+1)
			for j := range a.Results[i].Series {
				more = more || a.Results[i].Series[j].Partial
				a.Results[i].Series[j].statement = a.Results[i].Statement
				if err := take(&a.Results[i].Series[j]); err != nil {
					return err
				}
			}
		}
	}
}

// quoted writes an InfluxQL string.
func quoted(s string) string {
	return "'" + strings.NewReplacer(`\`, `\\`, `'`, `\'`, "\n", `\n`).Replace(s) + "'"
}

func (q *queried) runs(ctx context.Context, rig string) (out []string, err error) {
	query := `SHOW TAG VALUES FROM "indication" WITH KEY = "run"`
	if rig != "" {
		query += ` WHERE "rig" = ` + quoted(rig)
	}
	err = q.ask(ctx, query, func(s *series) error {
		for _, row := range s.Values {
			if v, ok := row[len(row)-1].(string); ok && !slices.Contains(out, v) {
				out = append(out, v)
			}
		}
		return nil
	})
	return out, err
}

// column is what one column of an answer is.
type column struct {
	key  string
	kind string // "", "time", "tag" or the type of a field
}

// shape asks which columns of a measurement are tags, and what its fields are.
func (q *queried) shape(ctx context.Context, measurement string) (map[string]string, error) {
	kinds := map[string]string{}
	if err := q.ask(ctx, `SHOW TAG KEYS FROM "`+measurement+`"`, func(s *series) error {
		for _, row := range s.Values {
			kinds[fmt.Sprint(row[0])] = "tag"
		}
		return nil
	}); err != nil {
		return nil, err
	}
	return kinds, q.ask(ctx, `SHOW FIELD KEYS FROM "`+measurement+`"`, func(s *series) error {
		for _, row := range s.Values {
			key := fmt.Sprint(row[0])
			if kinds[key] == "tag" || len(row) < 2 {
				return fmt.Errorf("%s: %s of %s is both a tag and a field: something else writes to the same database", q.s, key, measurement)
			}
			kinds[key] = fmt.Sprint(row[1])
		}
		return nil
	})
}

func (q *queried) points(ctx context.Context, run, measurement string, take func(*point) error) error {
	kinds, err := q.shape(ctx, measurement)
	if err != nil || len(kinds) == 0 {
		return err
	}
	var p point
	query := `SELECT * FROM "` + measurement + `" WHERE "run" = ` + quoted(run)
	return q.ask(ctx, query, func(s *series) error {
		columns := columnsOf(s, kinds)
		for _, row := range s.Values {
			if err := p.fill(measurement, columns, row); err != nil {
				return fmt.Errorf("%s: %w", q.s, err)
			}
			if err := take(&p); err != nil {
				return err
			}
		}
		return nil
	})
}

// columnsOf tells what the columns of a table are.
func columnsOf(s *series, kinds map[string]string) []column {
	columns := make([]column, len(s.Columns))
	for i, c := range s.Columns {
		columns[i] = column{c, kinds[c]}
		if c == "time" {
			columns[i].kind = "time"
		}
	}
	return columns
}

// fill makes a point of one row.
func (p *point) fill(measurement string, columns []column, row []any) error {
	p.measurement, p.tags, p.fields, p.at = measurement, p.tags[:0], p.fields[:0], 0
	for i, c := range columns {
		if i >= len(row) || row[i] == nil || c.key == "run" || c.key == "rig" {
			continue
		}
		if c.kind == "tag" {
			if v := fmt.Sprint(row[i]); v != "" {
				p.tags = append(p.tags, tag{c.key, v})
			}
			continue
		}
		v, err := typed(c.kind, row[i])
		if err != nil {
			return fmt.Errorf("%s %s: %w", measurement, c.key, err)
		}
		if c.kind == "time" {
			p.at = v.(int64)
		} else {
			p.fields = append(p.fields, field{c.key, v})
		}
	}
	return nil
}

// typed gives a cell the type that its column has on the server, which JSON
// does not keep.
func typed(kind string, cell any) (any, error) {
	n, isNumber := cell.(json.Number)
	switch {
	case kind == "time", kind == "integer", kind == "unsigned":
		if isNumber {
			return strconv.ParseInt(n.String(), 10, 64)
		}
	case isNumber:
		return n.Float64()
	}
	switch cell.(type) {
	case string, bool:
		return cell, nil
	}
	return nil, fmt.Errorf("%v is no value", cell)
}
