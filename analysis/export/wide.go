package export

import (
	"io"
	"time"

	"gaugelog/ingest/segment"
)

// columns are where one gauge or probe stands in a wide table, -1 where it has
// no such column.
type columns struct{ mm, shown, unit, status, celsius, humidity int }

// Wide writes one row for each round of readings, with a column for each gauge
// (NAME_mm) and each quantity of a probe (NAME_celsius, NAME_percent); gauges
// that displayed another unit or a status have NAME_shown, NAME_unit and
// NAME_status besides. A row begins with a reading and holds those of other
// gauges that follow within Options.Within, so each reading stands in exactly
// one row; the row's instant is that of its first reading.
func Wide(w io.Writer, d *segment.Folder, o Options) (Summary, error) {
	c, err := look(d, o)
	if err != nil {
		return Summary{}, err
	}
	if o.Within <= 0 {
		o.Within = time.Second
	}
	header := []string{"time_utc", "seconds_s"}
	column := func(name string) int {
		header = append(header, name)
		return len(header) - 1
	}
	rows := &wideRows{first: c.first, within: int64(o.Within), gauges: map[string]columns{}, probes: map[string]columns{}}
	for _, g := range c.gauges {
		k := columns{column(g + "_mm"), -1, -1, -1, -1, -1}
		if c.shown[g] {
			k.shown, k.unit = column(g+"_shown"), column(g+"_unit")
		}
		if c.status[g] {
			k.status = column(g + "_status")
		}
		rows.gauges[g] = k
	}
	for _, p := range c.probes {
		k := columns{-1, -1, -1, -1, -1, -1}
		if c.celsius[p] {
			k.celsius = column(p + "_celsius")
		}
		if c.humid[p] {
			k.humidity = column(p + "_percent")
		}
		rows.probes[p] = k
	}
	if rows.table, err = newTable(w, header); err != nil {
		return Summary{}, err
	}
	n, left, err := pass(d, c, o, rows)
	return Summary{Rows: rows.rows, Readings: n, Left: left}, err
}

// wideRows gathers readings into rows.
type wideRows struct {
	*table
	first, within  int64
	gauges, probes map[string]columns
	open           bool
	from           int64
}

func (w *wideRows) add(r *segment.Record) error {
	k := w.gauges[r.Name]
	if r.Kind == segment.Ambient {
		k = w.probes[r.Name]
	}
	v := valuesOf(r)
	if w.open && (r.Time < w.from || r.Time-w.from > w.within || w.taken(k, v)) {
		if err := w.flushRow(); err != nil {
			return err
		}
		w.open = false
	}
	if !w.open {
		w.open, w.from = true, r.Time
		w.when(r.Time, w.first)
	}
	w.put(k, v)
	return nil
}

// each pairs the columns with the values that are given.
func (k columns) each(v values, f func(column int, text string)) {
	for _, c := range []struct {
		column int
		text   string
	}{{k.mm, v.mm}, {k.shown, v.shown}, {k.unit, v.unit}, {k.status, v.status}, {k.celsius, v.celsius}, {k.humidity, v.humidity}} {
		if c.column >= 0 && c.text != "" {
			f(c.column, c.text)
		}
	}
}

// taken tells whether the row already holds such a reading.
func (w *wideRows) taken(k columns, v values) bool {
	if k.mm >= 0 && w.cells[k.mm] != "" {
		return true
	}
	taken := false
	k.each(v, func(column int, _ string) { taken = taken || w.cells[column] != "" })
	return taken
}

func (w *wideRows) put(k columns, v values) {
	k.each(v, func(column int, text string) { w.cells[column] = text })
}

func (w *wideRows) end() error {
	if w.open {
		if err := w.flushRow(); err != nil {
			return err
		}
		w.open = false
	}
	return w.table.end()
}
