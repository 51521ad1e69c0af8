package desk

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gaugelog/ingest/segment"
)

// Local is an instant in the rig's time zone.
func (d *Desk) Local(t time.Time) time.Time { return t.In(d.zone) }

// zoneOf finds the rig's time zone; the rig file's check refused unknown ones.
func zoneOf(name string) *time.Location {
	zone, err := time.LoadLocation(name)
	if err != nil {
		return time.UTC
	}
	return zone
}

// Span words a length of time for people: two units at most.
func Span(d time.Duration) string {
	if d < 0 {
		d = 0
	}
	type unit struct {
		name string
		size time.Duration
	}
	units := []unit{{"d", 24 * time.Hour}, {"h", time.Hour}, {"min", time.Minute}, {"s", time.Second}}
	if d < 10*time.Second {
		return strconv.FormatFloat(d.Seconds(), 'f', 1, 64) + " s"
	}
	for i, u := range units {
		if d < u.size {
			continue
		}
		n := d / u.size
		out := fmt.Sprintf("%d %s", n, u.name)
		if i+1 < len(units) && n < 10 {
			if rest := (d - n*u.size) / units[i+1].size; rest > 0 {
				out += fmt.Sprintf(" %d %s", rest, units[i+1].name)
			}
		}
		return out
	}
	return "0 s"
}

// Fixed prints a length in mm with the decimals of a resolution.
func Fixed(v, resolution float64) string {
	return strings.Replace(strconv.FormatFloat(noMinusZero(v, Decimals(resolution)), 'f', Decimals(resolution), 64), "-", "−", 1)
}

// Signed is Fixed with the sign always before it.
func Signed(v, resolution float64) string {
	s := Fixed(v, resolution)
	if strings.HasPrefix(s, "−") || strings.Trim(s, "0.") == "" {
		return s
	}
	return "+" + s
}

func noMinusZero(v float64, decimals int) float64 {
	if p := math.Pow(10, float64(decimals)); math.Round(v*p) == 0 {
		return 0
	}
	return v
}

// Decimals is how many decimals show a resolution in mm: 3 for 0.001 and 0.005.
func Decimals(resolution float64) int {
	if !(resolution > 0) {
		return 3
	}
	n := 0
	for ; n < 6 && resolution < 0.9999; n++ {
		resolution *= 10
	}
	return n
}

// Bytes words a size with powers of 1000.
func Bytes(n int64) string {
	v := float64(n)
	for _, unit := range []string{"B", "kB", "MB", "GB"} {
		if v < 1000 {
			return strconv.FormatFloat(v, 'f', 0, 64) + " " + unit
		}
		v /= 1000
	}
	return strconv.FormatFloat(v, 'f', 1, 64) + " TB"
}

func eventsOf(fsys segment.FS) ([]segment.Record, error) {
	folder, err := segment.OpenFolder(fsys)
	if err != nil {
		return nil, err
	}
	records, _, err := folder.Log(segment.EventsFile)
	return records, err
}
