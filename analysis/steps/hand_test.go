package steps

import (
	"strings"
	"testing"
)

// Before the load readings come every second; the load is hung and marked just
// behind the last of them, and the next is read by hand nine hours later, then
// once a day: it is said why that is too late.
func TestLoadHungBeforeALongPauseIsTold(t *testing.T) {
	w := plank()
	w.changes = []wchange{{at: 1803, late: 2, newton: []float64{171.8, 171.8}, name: "s1"}}
	w.length = 20 * 86400
	w.every = 1
	for from := 1803.5; from < w.length; from += 86400 {
		to := from + 86399
		if from < 1804 {
			to = from + 9*3600
			from = to + 1.5 - 86400
			w.silent = append(w.silent, [2]float64{1803.5, to})
			continue
		}
		w.silent = append(w.silent, [2]float64{from, to})
	}
	f := w.find(t)
	for _, v := range f.Warnings {
		if v.Code == "mark-without-response" && strings.Contains(v.Text, "the next reading came 32195 s later, too late") {
			return
		}
	}
	t.Errorf("%+v", f.Warnings)
}
