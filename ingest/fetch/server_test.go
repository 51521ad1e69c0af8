package fetch

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gaugelog/ingest/segment"
)

const rigText = `specimen:
  name: strip
  section: {shape: rectangle, width: 20 mm, depth: 5 mm}
  length: 500 mm
supports: [{name: l, at: 0 mm}, {name: r, at: 500 mm}]
gauges: [{name: mid, at: 250 mm, sense: down, resolution: 0.01 mm}]
loads: [{name: pan, at: 250 mm}]
`

// scripted answers each query by its first words, in order of the table.
type scripted struct {
	*httptest.Server
	asked []*http.Request
}

// serve answers with what reply gives; reply may write to w itself and return "".
func serve(t *testing.T, reply func(w http.ResponseWriter, r *http.Request) string) *scripted {
	t.Helper()
	s := &scripted{}
	s.Server = httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		s.asked = append(s.asked, r)
		fmt.Fprint(w, reply(w, r))
	}))
	t.Cleanup(s.Close)
	return s
}

// tables is a server that holds one run of a few points, answering in chunks as
// InfluxDB 1.6 does. change may put another answer in place of one, by query.
func tables(t *testing.T, change func(query string) (string, bool)) *scripted {
	t.Helper()
	return serve(t, func(_ http.ResponseWriter, r *http.Request) string {
		q := r.URL.Query().Get("q")
		if change != nil {
			if text, ok := change(q); ok {
				return text
			}
		}
		switch {
		case strings.HasPrefix(q, "SHOW TAG VALUES"):
			return series1("indication", `["key","value"]`, `["run","run-1"]`)
		case q == `SHOW TAG KEYS FROM "indication"`:
			return series1("indication", `["tagKey"]`, `["gauge"],["rig"],["run"]`)
		case q == `SHOW FIELD KEYS FROM "indication"`:
			return series1("indication", `["fieldKey","fieldType"]`, `["mm","float"],["shown","float"],["unit","string"]`)
		case q == `SHOW TAG KEYS FROM "load"`:
			return series1("load", `["tagKey"]`, `["name"],["rig"],["run"]`)
		case q == `SHOW FIELD KEYS FROM "load"`:
			return series1("load", `["fieldKey","fieldType"]`, `["newton","float"],["n","integer"],["shown","string"]`)
		case strings.HasPrefix(q, `SELECT * FROM "indication"`):
			columns := `["time","gauge","mm","rig","run","shown","unit"]`
			return piece("indication", columns, `[1790000000000000001,"mid",1,"strip","run-1",null,null],[1790000001000000002,"mid",25.4,"strip","run-1",1,"in"]`, true) +
				piece("indication", columns, `[1790000002000000003,"mid",1.25,"strip","run-1",null,null]`, false)
		case strings.HasPrefix(q, `SELECT * FROM "load"`):
			return piece("load", `["time","n","name","newton","rig","run","shown"]`, `[1790000001000000000,3,"pan",9.8,"strip","run-1","1 kg"]`, false)
		}
		return `{"results":[{"statement_id":0}]}` + "\n"
	})
}

func piece(name, columns, values string, partial bool) string {
	more := ""
	if partial {
		more = `,"partial":true`
	}
	return fmt.Sprintf(`{"results":[{"statement_id":0,"series":[{"name":%q,"columns":%s,"values":[%s]%s}]%s}]}`+"\n", name, columns, values, more, more)
}

func series1(name, columns, values string) string { return piece(name, columns, values, false) }

// fetchFrom reads a run back and gives its records as text, in order.
func fetchFrom(t *testing.T, ctx context.Context, address, token string, change func(*Options)) (Summary, []string, error) {
	t.Helper()
	source, err := ParseSource(address, token, false)
	if err != nil {
		t.Fatal(err)
	}
	o := Options{Source: source, RigBytes: []byte(rigText), Program: "test"}
	if change != nil {
		change(&o)
	}
	parent := t.TempDir()
	into := filepath.Join(parent, "run")
	s, err := Fetch(ctx, into, o)
	if err != nil {
		if left, _ := os.ReadDir(parent); len(left) > 0 {
			t.Errorf("after the error %v there is still %v", err, left)
		}
		return s, nil, err
	}
	root, err := os.OpenRoot(into)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	d, err := segment.OpenFolder(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		t.Fatal(err)
	}
	var lines []string
	say := func(r *segment.Record) {
		line := fmt.Sprint(r.Kind, " ", r.Name, " ", r.MM)
		if r.Point != nil {
			line = fmt.Sprint(r.Point.Measurement, r.Point.Tags, r.Point.Fields)
		}
		lines = append(lines, fmt.Sprint(line, " ", r.Time))
	}
	r := d.Read(segment.ReadOptions{})
	defer r.Close()
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		say(&rec)
	}
	for _, name := range []string{segment.MarksFile, segment.EventsFile} {
		records, _, err := d.Log(name)
		if err != nil {
			t.Fatal(err)
		}
		for i := range records {
			say(&records[i])
		}
	}
	if b, err := os.ReadFile(filepath.Join(into, segment.RigFile)); err != nil || !bytes.Equal(b, o.RigBytes) {
		t.Errorf("rig.yaml is %q, %v", b, err)
	}
	return s, lines, nil
}

// metric is one line of an export.
func metric(labels map[string]string, values []any, at []int64) string {
	b, err := json.Marshal(map[string]any{"metric": labels, "values": values, "timestamps": at})
	if err != nil {
		panic(err)
	}
	return string(b) + "\n"
}
