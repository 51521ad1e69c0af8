package fetch

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"time"
)

// exported reads the JSON export of a server that keeps numbers only, and each
// field as a series of its own named MEASUREMENT_FIELD.
type exported struct{ s *Source }

// exportPath is cut off the address to reach the server's other interfaces.
const exportPath = "/api/v1/export"

func (e *exported) loses() string {
	return "stamps are to the millisecond; names of steps, notes and the words of events are not held"
}

// selector picks the series of a run, with a pattern for the name; several
// fields of a measurement are picked at once.
func selector(name, run, rig string) string {
	s := `{__name__=~"` + name + `"`
	if run != "" {
		s += `,run=` + strconv.Quote(run)
	}
	if rig != "" {
		s += `,rig=` + strconv.Quote(rig)
	}
	return s + "}"
}

func (e *exported) runs(ctx context.Context, rig string) ([]string, error) {
	var a struct {
		Data []string `json:"data"`
	}
	err := e.json(ctx, "/api/v1/label/run/values", url.Values{"match[]": {selector("indication_mm", "", rig)}, "start": {"2000-01-01T00:00:00Z"}}, &a)
	return a.Data, err
}

// json reads one answer whole.
func (e *exported) json(ctx context.Context, path string, q url.Values, to any) error {
	body, err := e.s.get(ctx, exportPath, path, q)
	if err != nil {
		return err
	}
	defer body.Close()
	if err := json.NewDecoder(io.LimitReader(body, 16<<20)).Decode(to); err != nil {
		return fmt.Errorf("%s: no answer of such a server at %s: %w", e.s, path, err)
	}
	return nil
}

// extent is the first and the last instant of a measurement in a run, ms.
func (e *exported) extent(ctx context.Context, name, run string) (first, last int64, ok bool, err error) {
	at := [2]int64{}
	for i, f := range []string{"min(tfirst_over_time(", "max(tlast_over_time("} {
		var a struct {
			Data struct {
				Result []struct {
					Value [2]any `json:"value"`
				} `json:"result"`
			} `json:"data"`
		}
		// Fifty years back from a day ahead: whatever a run may hold. A
		// hundred would begin before 1970, and find nothing.
		q := url.Values{"query": {f + selector(name, run, "") + "[50y]))"}, "time": {strconv.FormatInt(time.Now().Add(24*time.Hour).Unix(), 10)}, "nocache": {"1"}}
		if err := e.json(ctx, "/api/v1/query", q, &a); err != nil {
			return 0, 0, false, err
		}
		if len(a.Data.Result) == 0 {
			return 0, 0, false, nil
		}
		s, err := strconv.ParseFloat(fmt.Sprint(a.Data.Result[0].Value[1]), 64)
		if err != nil {
			return 0, 0, false, fmt.Errorf("%s: %w", e.s, err)
		}
		at[i] = int64(s*1000 + 0.5)
	}
	return at[0], at[1], true, nil
}

// Windows of time are made so long that they hold between fewest and most
// values, which bounds memory.
const (
	fewestValues = 100_000
	mostValues   = 1_000_000
	firstWindow  = 3600_000       // ms
	longest      = 31_536_000_000 // ms, a year
)

func (e *exported) points(ctx context.Context, run, measurement string, take func(*point) error) error {
	name := measurement + "_.*"
	first, last, ok, err := e.extent(ctx, name, run)
	if err != nil || !ok {
		return err
	}
	for from, width := first, int64(firstWindow); from <= last; {
		to := min(from+width-1, last)
		list, n, err := e.window(ctx, name, measurement, run, from, to)
		if errors.Is(err, errTooMany) && width > 1000 {
			width /= 4
			continue
		}
		if err != nil {
			return err
		}
		for _, p := range list {
			if err := take(p); err != nil {
				return err
			}
		}
		from = to + 1
		if n < fewestValues {
			width = min(2*width, longest)
		}
	}
	return nil
}

var errTooMany = errors.New("too many values for one window of time")

// exportLine is one line of an export: some values of one series.
type exportLine struct {
	Metric     map[string]string `json:"metric"`
	Values     []json.Number     `json:"values"`
	Timestamps []int64           `json:"timestamps"`
}

// window reads the points between two instants, ms, both included, in order.
func (e *exported) window(ctx context.Context, name, measurement, run string, from, to int64) ([]*point, int, error) {
	q := url.Values{"match[]": {selector(name, run, "")}, "start": {seconds(from)}, "end": {seconds(to)}, "reduce_mem_usage": {"1"}}
	body, err := e.s.get(ctx, exportPath, exportPath, q)
	if err != nil {
		return nil, 0, err
	}
	defer body.Close()
	b := joiner{measurement: measurement, points: map[string]*point{}, from: from, to: to}
	d := json.NewDecoder(bufio.NewReaderSize(body, 1<<16))
	for {
		var line exportLine
		if err := d.Decode(&line); errors.Is(err, io.EOF) {
			return b.sorted(), b.n, nil
		} else if err != nil {
			return nil, 0, fmt.Errorf("%s: the export breaks off or is none: %w", e.s, err)
		}
		if b.n += len(line.Values); b.n > mostValues {
			return nil, b.n, errTooMany
		}
		if err := b.add(line.Metric, line.Values, line.Timestamps); err != nil {
			return nil, 0, fmt.Errorf("%s: %w", e.s, err)
		}
	}
}

func seconds(ms int64) string { return strconv.FormatFloat(float64(ms)/1000, 'f', 3, 64) }

// joiner makes points of values that came back field by field. A value that is
// held twice counts once.
type joiner struct {
	measurement string
	points      map[string]*point
	from, to    int64
	n           int
}

func (j *joiner) add(metric map[string]string, values []json.Number, at []int64) error {
	key := strings.TrimPrefix(metric["__name__"], j.measurement+"_")
	var tags []tag
	for k, v := range metric {
		if k != "__name__" && k != "run" && k != "rig" && k != "db" {
			tags = append(tags, tag{k, v})
		}
	}
	slices.SortFunc(tags, func(a, b tag) int { return strings.Compare(a.key, b.key) })
	of := fmt.Sprint(tags)
	for i := range min(len(values), len(at)) {
		if at[i] < j.from || at[i] > j.to {
			continue
		}
		v, err := values[i].Float64()
		if err != nil {
			return err
		}
		id := strconv.FormatInt(at[i], 10) + of
		p := j.points[id]
		if p == nil {
			p = &point{measurement: j.measurement, tags: tags, at: at[i] * 1e6}
			j.points[id] = p
		}
		if !slices.ContainsFunc(p.fields, func(f field) bool { return f.key == key }) {
			p.fields = append(p.fields, field{key, whole(key, v)})
		}
	}
	return nil
}

// whole gives a count back the type it had in the folder.
func whole(key string, v float64) any {
	if key == "n" || key == "from" {
		return int64(v)
	}
	return v
}

func (j *joiner) sorted() []*point {
	out := make([]*point, 0, len(j.points))
	for _, p := range j.points {
		slices.SortFunc(p.fields, func(a, b field) int { return strings.Compare(a.key, b.key) })
		out = append(out, p)
	}
	slices.SortFunc(out, func(a, b *point) int {
		switch {
		case a.at != b.at:
			if a.at < b.at {
				return -1
			}
			return 1
		default:
			return strings.Compare(fmt.Sprint(a.tags), fmt.Sprint(b.tags))
		}
	})
	return out
}
