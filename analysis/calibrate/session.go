package calibrate

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"
)

// The directions in which the blocks of a session were taken.
const (
	Up   = "up"
	Down = "down"
)

// Point is one block under the gauge and what the gauge showed.
type Point struct {
	BlockMM   float64 `json:"block_mm"`   // the block's certified length at 20 C, 0 for the anvil itself
	ReadingMM float64 `json:"reading_mm"` // the indication
	Direction string  `json:"direction"`  // Up | Down
	Time      string  `json:"time,omitempty"`
}

// Session is everything a calibration is made from.
type Session struct {
	Points []Point
	// BlockCelsius is the blocks' temperature; nil: they count as being at
	// 20 C.
	BlockCelsius *float64
	// BlockU is the standard uncertainty of one block's length, independent
	// from block to block; 0 where unknown.
	BlockU float64
	// Resolution is the gauge's step, more than 0: scatter below it cannot be
	// seen, so the scatter counts as at least Resolution over sqrt(12).
	Resolution float64
	// Travel is the gauge's lowest and highest indication, or empty.
	Travel []float64
}

// AddDirections fills in the directions that are missing, from the order of
// the points: a longer block than before is the way up, a shorter one the way
// down, the same block goes the same way as before.
func AddDirections(points []Point) {
	way := Up
	for i := range points {
		if i > 0 && points[i].BlockMM != points[i-1].BlockMM {
			way = Up
			if points[i].BlockMM < points[i-1].BlockMM {
				way = Down
			}
		}
		if points[i].Direction == "" {
			points[i].Direction = way
		}
	}
}

// columns of a session's CSV; the first two are required.
var columns = []string{"block_mm", "reading_mm", "direction", "time"}

// ReadCSV reads a session: a heading with block_mm, reading_mm and optionally
// direction and time, then a row a point, in the order in which they were
// taken. Directions left out are told from the order. Lines that begin with #
// are comments. The error names the file and line.
func ReadCSV(name string, r io.Reader) ([]Point, error) {
	c := csv.NewReader(r)
	c.Comment = '#'
	c.TrimLeadingSpace = true
	head, err := c.Read()
	if err == io.EOF {
		return nil, fmt.Errorf("%s:1: the file is empty", name)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	for i, h := range head {
		h = strings.TrimSpace(strings.TrimPrefix(h, "\ufeff"))
		if !slices.Contains(columns, h) || slices.Contains(head[:i], h) {
			return nil, fmt.Errorf("%s:1: column %q is not one of %s, each once", name, h, strings.Join(columns, ", "))
		}
		head[i] = h
	}
	for _, need := range columns[:2] {
		if !slices.Contains(head, need) {
			return nil, fmt.Errorf("%s:1: there is no column %s", name, need)
		}
	}
	var points []Point
	for {
		row, err := c.Read()
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		line, _ := c.FieldPos(0)
		p, err := pointOf(head, row)
		if err != nil {
			return nil, fmt.Errorf("%s:%d: %w", name, line, err)
		}
		points = append(points, p)
	}
	AddDirections(points)
	return points, nil
}

func pointOf(head, row []string) (p Point, err error) {
	for i, h := range head {
		text := strings.TrimSpace(row[i])
		switch h {
		case "block_mm":
			p.BlockMM, err = number(h, text)
			if err == nil && p.BlockMM < 0 {
				err = fmt.Errorf("a block of %g\u202fmm does not exist", p.BlockMM)
			}
		case "reading_mm":
			p.ReadingMM, err = number(h, text)
		case "direction":
			if p.Direction = text; text != "" && text != Up && text != Down {
				err = fmt.Errorf("direction %q is neither up nor down", text)
			}
		case "time":
			p.Time = text
		}
		if err != nil {
			return p, err
		}
	}
	return p, nil
}

func number(column, text string) (float64, error) {
	v, err := strconv.ParseFloat(text, 64)
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return 0, fmt.Errorf("%s %q is no plain number of millimetres, such as 5.001", column, text)
	}
	return v, nil
}

// WriteCSV writes points as ReadCSV reads them.
func WriteCSV(w io.Writer, points []Point) error {
	c := csv.NewWriter(w)
	rows := [][]string{columns}
	for _, p := range points {
		rows = append(rows, []string{plain(p.BlockMM), plain(p.ReadingMM), p.Direction, p.Time})
	}
	return errors.Join(c.WriteAll(rows), c.Error())
}

func plain(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }
