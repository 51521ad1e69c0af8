package export

import (
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"strconv"
	"time"
)

// Options chooses what a raw table holds.
type Options struct {
	// Gauges and Probes give the order of the columns, as the rig file lists
	// them. Others follow in order of appearance.
	Gauges, Probes []string
	// Within is the longest time between the first and the last reading of one
	// row of a wide table; 0 is one second.
	Within time.Duration
	// Progress, where not nil, is told how many lines were written, of how many.
	Progress func(done, all int64)
}

// Summary tells what a table holds.
type Summary struct {
	Rows, Readings int64
	// Left lists the damaged parts of the folder that were left out, in words.
	Left []string
}

// table writes rows of one width.
type table struct {
	w     *csv.Writer
	cells []string
	rows  int64
	stamp []byte
}

func newTable(w io.Writer, header []string) (*table, error) {
	t := &table{w: csv.NewWriter(w), cells: make([]string, len(header))}
	t.w.UseCRLF = true
	return t, t.w.Write(header)
}

// flushRow writes the cells and empties them.
func (t *table) flushRow() error {
	if err := t.w.Write(t.cells); err != nil {
		return fmt.Errorf("writing the table: %w", err)
	}
	t.rows++
	clear(t.cells)
	return nil
}

func (t *table) end() error {
	t.w.Flush()
	if err := t.w.Error(); err != nil {
		return fmt.Errorf("writing the table: %w", err)
	}
	return nil
}

// when fills the two cells of an instant.
func (t *table) when(at, first int64) {
	t.stamp = time.Unix(0, at).UTC().AppendFormat(t.stamp[:0], "2006-01-02T15:04:05.000000000Z")
	t.cells[0] = string(t.stamp)
	t.cells[1] = Seconds(at - first)
}

// Seconds writes a time in nanoseconds as decimal seconds, exactly.
func Seconds(ns int64) string {
	sign, n := "", uint64(ns)
	if ns < 0 {
		sign, n = "-", -n
	}
	whole, part := n/1e9, n%1e9
	if part == 0 {
		return sign + strconv.FormatUint(whole, 10)
	}
	b := fmt.Appendf(nil, "%s%d.%09d", sign, whole, part)
	for b[len(b)-1] == '0' {
		b = b[:len(b)-1]
	}
	return string(b)
}

// number writes a number as plain decimals that give the same float64 back;
// empty where there is none.
func number(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return ""
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

// rounded writes a number that was worked out, to a millionth.
func rounded(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return ""
	}
	if text := strconv.FormatFloat(v, 'f', 6, 64); text != "-0.000000" {
		return text
	}
	return "0.000000"
}
