package answer_test

import (
	"testing"
	"time"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
	"gaugelog/ingest/rollup"
)

// How far back nothing was found is said truly: a run younger than a day has no
// yesterday.
func TestSinceWhenNothingWasFound(t *testing.T) {
	d, s := desktest.Morning(t)
	s.Outlook.Disturbances = nil
	if got := answer.Of(d, s).Knocked.Short; got != "No: nothing found since yesterday 07:14" {
		t.Errorf("of a long run: %q", got)
	}
	young := *s
	at := s.At.Add(-3 * time.Hour).UnixNano()
	young.Curves = &desk.Curves{Series: []desk.Curve{{Name: "mid", Whole: []rollup.Bin{{N: 1, FirstTime: at, LastTime: at}}}, {}, {}, {}, {}}}
	if got := answer.Of(d, &young).Knocked.Short; got != "No: nothing found since the recording began" {
		t.Errorf("of a young run: %q", got)
	}
	young.Rebuilding = true
	if got := answer.Of(d, &young).Knocked.Short; got != "No: nothing found since yesterday 07:14" {
		t.Errorf("while it is being read: %q", got)
	}
}
