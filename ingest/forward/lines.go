package forward

import (
	"fmt"
	"slices"
	"strconv"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"

	"gaugelog/ingest/segment"
)

// liner writes records as lines with the run's tags.
type liner struct {
	tags []segment.Tag // run and rig
	enc  lineprotocol.Encoder
	// heads are the beginnings of plain indications, by gauge name.
	heads map[string][]byte
}

func newLiner(run, rig string) *liner {
	l := &liner{heads: map[string][]byte{}}
	for _, t := range []segment.Tag{{Key: "rig", Value: rig}, {Key: "run", Value: run}} {
		if t.Value != "" {
			l.tags = append(l.tags, t)
		}
	}
	return l
}

// batch appends the lines of a batch in order. A record that no line can hold
// is handed to failed and left out.
func (l *liner) batch(to []byte, b *segment.Batch, gauges []string, failed func(error) error) ([]byte, error) {
	o := 0
	for i := 0; ; i++ {
		for ; o < len(b.Others) && b.OtherAt[o] == i; o++ {
			more, err := l.record(to, &b.Others[o])
			if err == nil {
				to = more
			} else if err := failed(err); err != nil {
				return nil, err
			}
		}
		if i == len(b.Gauge) {
			return to, nil
		}
		head, err := l.head(gauges[b.Gauge[i]])
		if err != nil {
			if err := failed(err); err != nil {
				return nil, err
			}
			continue
		}
		to = append(to, head...)
		to = strconv.AppendFloat(to, float64(b.Micro[i])/1e6, 'f', -1, 64)
		to = append(to, ' ')
		to = strconv.AppendInt(to, b.Time[i], 10)
		to = append(to, '\n')
	}
}

// head is "indication,gauge=NAME,rig=RIG,run=RUN mm=".
func (l *liner) head(gauge string) ([]byte, error) {
	if h, ok := l.heads[gauge]; ok {
		return h, nil
	}
	line, err := l.encode("indication", []segment.Tag{{Key: "gauge", Value: gauge}}, []segment.Field{{Key: "mm", Value: int64(0)}}, 1)
	if err != nil {
		return nil, err
	}
	h := slices.Clone(line[:len(line)-len("0i 1\n")])
	l.heads[gauge] = h
	return h, nil
}

// record appends one record that is no plain indication.
func (l *liner) record(to []byte, r *segment.Record) ([]byte, error) {
	var line []byte
	var err error
	if r.Point == nil {
		line, err = l.encode("indication", []segment.Tag{{Key: "gauge", Value: r.Name}}, []segment.Field{{Key: "mm", Value: r.MM}}, r.Time)
	} else {
		line, err = l.encode(r.Point.Measurement, r.Point.Tags, r.Point.Fields, r.Time)
	}
	return append(to, line...), err
}

// encode writes one line; the result is valid until the next call. A tag of the
// same name in the run goes before ours.
func (l *liner) encode(measurement string, tags []segment.Tag, fields []segment.Field, at int64) ([]byte, error) {
	all := slices.Clone(tags)
	for _, t := range l.tags {
		if !slices.ContainsFunc(all, func(x segment.Tag) bool { return x.Key == t.Key }) {
			all = append(all, t)
		}
	}
	slices.SortFunc(all, func(a, b segment.Tag) int {
		if a.Key < b.Key {
			return -1
		}
		return 1
	})
	l.enc.Reset()
	l.enc.ClearErr()
	l.enc.StartLine(measurement)
	for _, t := range all {
		l.enc.AddTag(t.Key, t.Value)
	}
	for _, f := range fields {
		v, ok := lineprotocol.NewValue(f.Value)
		if !ok {
			return nil, fmt.Errorf("%s: field %s cannot be sent: %v", measurement, f.Key, f.Value)
		}
		l.enc.AddField(f.Key, v)
	}
	l.enc.EndLine(time.Unix(0, at))
	if err := l.enc.Err(); err != nil {
		return nil, fmt.Errorf("%s: %w", measurement, err)
	}
	return l.enc.Bytes(), nil
}
