package desk

import (
	"strings"
	"testing"

	"gaugelog/ingest/alarm"
	"gaugelog/ingest/forward"
)

// Only a sending that waits for a person raises an alarm: not one that has no
// server, or whose server is absent.
func TestForwardAlarm(t *testing.T) {
	for _, c := range []struct {
		state *forward.State
		want  alarm.Wish
	}{
		{nil, alarm.Over},
		{&forward.State{Segments: 3}, alarm.Over},
		{&forward.State{Segments: 3, Words: "connection refused"}, alarm.Over},
		{&forward.State{Held: true, Words: "401 Unauthorized"}, alarm.Raise},
	} {
		f := new(Desk).forwardFact(&Snapshot{Forward: c.state})
		if f.Cause != "forward" || f.Wish != c.want || (f.Wish == alarm.Raise) != strings.Contains(f.Text, "401 Unauthorized") {
			t.Errorf("%+v: %+v", c.state, f)
		}
	}
}
