package report

import (
	"reflect"
	"testing"

	"gaugelog/analysis"
)

// A plot shows a disturbance where the table has it: counted from the first
// reading, to the record's end where it lasts beyond it, and under the same
// number though one before it cannot be placed.
func TestDisturbedKeepsTheTablesNumbers(t *testing.T) {
	end, later := "2026-03-01T12:00:00Z", "2026-04-01T00:00:00Z"
	b := &builder{r: &analysis.Result{
		Run: analysis.Run{First: "2026-03-01T00:00:00Z"},
		Disturbances: []analysis.Disturbance{
			{Kind: "spike", From: "2026-03-01T06:00:00Z"},
			{Kind: "spike", From: "not a time"},
			{Kind: "gap", From: "2026-03-01T06:00:00Z", To: &end},
			{Kind: "frozen", From: "2026-03-01T18:00:00Z", To: &later},
		},
		Series: analysis.Series{Gauges: []analysis.GaugeSeries{{TimeS: []float64{0, 86400}}}},
	}}
	want := happenings{{6, 6, 1}, {6, 12, 3}, {18, 24, 4}}
	if got := b.disturbed(3600); !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}
