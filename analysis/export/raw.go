package export

import (
	"io"
	"math"
	"slices"

	"gaugelog/ingest/segment"
)

// contents is what a first pass learns of a folder.
type contents struct {
	first          int64 // least instant of an indication or probe's reading
	lines          int64
	gauges, probes []string
	// shown and status name the gauges whose readings carry such a field,
	// celsius and humid the probes.
	shown, status, celsius, humid map[string]bool
}

// look takes the first pass.
func look(d *segment.Folder, o Options) (*contents, error) {
	c := &contents{first: math.MaxInt64, gauges: slices.Clone(o.Gauges), probes: slices.Clone(o.Probes),
		shown: map[string]bool{}, status: map[string]bool{}, celsius: map[string]bool{}, humid: map[string]bool{}}
	r := d.Read(segment.ReadOptions{Gauges: o.Gauges})
	defer r.Close()
	for {
		b, err := r.Next()
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, err
		}
		c.lines += int64(b.Len())
		for _, t := range b.Time {
			c.first = min(c.first, t)
		}
		for i := range b.Others {
			c.other(&b.Others[i])
		}
	}
	for _, g := range r.Gauges() {
		if !slices.Contains(c.gauges, g) {
			c.gauges = append(c.gauges, g)
		}
	}
	return c, nil
}

func (c *contents) other(r *segment.Record) {
	switch r.Kind {
	case segment.Indication:
		c.first = min(c.first, r.Time)
		if !slices.Contains(c.gauges, r.Name) {
			c.gauges = append(c.gauges, r.Name)
		}
		if r.Point == nil {
			return
		}
		if _, ok := r.Point.Value("shown"); ok {
			c.shown[r.Name] = true
		}
		if _, ok := r.Point.Value("status"); ok {
			c.status[r.Name] = true
		}
	case segment.Ambient:
		c.first = min(c.first, r.Time)
		if !slices.Contains(c.probes, r.Name) {
			c.probes = append(c.probes, r.Name)
		}
		if _, ok := r.Point.Value("celsius"); ok {
			c.celsius[r.Name] = true
		}
		if _, ok := r.Point.Value("humidity_percent"); ok {
			c.humid[r.Name] = true
		}
	}
}

// values are the cells of one reading.
type values struct{ mm, shown, unit, status, celsius, humidity string }

func valuesOf(r *segment.Record) values {
	var v values
	if r.Kind == segment.Indication {
		v.mm = number(r.MM)
	}
	if r.Point == nil {
		return v
	}
	text := func(key string) string {
		switch x, _ := r.Point.Value(key); x := x.(type) {
		case string:
			return x
		case float64:
			return number(x)
		case int64:
			return number(float64(x))
		}
		return ""
	}
	v.shown, v.unit, v.status = text("shown"), text("unit"), text("status")
	v.celsius, v.humidity = text("celsius"), text("humidity_percent")
	return v
}

// rowWriter takes the readings of a pass, in the folder's order.
type rowWriter interface {
	add(r *segment.Record) error
	end() error
}

// pass feeds every reading to w.
func pass(d *segment.Folder, c *contents, o Options, w rowWriter) (int64, []string, error) {
	reader := d.Read(segment.ReadOptions{Gauges: o.Gauges})
	defer reader.Close()
	var done, readings int64
	for r, err := range reader.Records() {
		if err != nil {
			return 0, nil, err
		}
		if done++; done&0xfff == 0 && o.Progress != nil {
			o.Progress(done, c.lines)
		}
		if r.Kind != segment.Indication && r.Kind != segment.Ambient {
			continue
		}
		if err := w.add(&r); err != nil {
			return 0, nil, err
		}
		readings++
	}
	if o.Progress != nil {
		o.Progress(c.lines, c.lines)
	}
	var left []string
	for _, d := range reader.Report().Damage {
		left = append(left, d.String())
	}
	return readings, left, w.end()
}

// Long writes one row a reading, in the folder's order (that of recording):
//
//	time_utc, seconds_s, name, indication_mm, shown, unit, status, temperature_celsius, humidity_percent
//
// shown and unit are what the gauge displayed where that was not mm; a probe's
// row has a temperature or a humidity and no indication.
func Long(w io.Writer, d *segment.Folder, o Options) (Summary, error) {
	c, err := look(d, o)
	if err != nil {
		return Summary{}, err
	}
	t, err := newTable(w, []string{"time_utc", "seconds_s", "name", "indication_mm", "shown", "unit", "status",
		"temperature_celsius", "humidity_percent"})
	if err != nil {
		return Summary{}, err
	}
	n, left, err := pass(d, c, o, &longRows{t, c.first})
	return Summary{Rows: t.rows, Readings: n, Left: left}, err
}

type longRows struct {
	*table
	first int64
}

func (l *longRows) add(r *segment.Record) error {
	l.when(r.Time, l.first)
	v := valuesOf(r)
	copy(l.cells[2:], []string{r.Name, v.mm, v.shown, v.unit, v.status, v.celsius, v.humidity})
	return l.flushRow()
}
