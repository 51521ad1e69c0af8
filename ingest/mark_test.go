package ingest

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/influxdata/line-protocol/v2/lineprotocol"

	"gaugelog/config"
	"gaugelog/device"
)

func kg(v float64) *float64 { return &v }

// wallClock is a clock that the test sets.
func clockAt(at device.Instant) *FixedClock {
	return &FixedClock{At: at, Known: ClockState{BootID: "boot-1", Synchronised: true}}
}

func markedRun(t *testing.T) *Dir {
	t.Helper()
	d, err := OpenDir(t.TempDir(), DirOptions{})
	must(t, err)
	t.Cleanup(func() { d.Close() })
	r := mustOpen(t, testOptions(d.FS(), testRig(1, config.Sampling{All: true})))
	must(t, r.Close(testStart))
	return d
}

func TestMarksAreWrittenAsDesigned(t *testing.T) {
	d := markedRun(t)
	minute := func(n int) device.Instant { return later(testStart, time.Duration(n)*time.Minute) }
	enter := func(n int, m Mark) string {
		t.Helper()
		id, err := d.AppendMark(m, clockAt(minute(n)))
		must(t, err)
		return id
	}
	if id := enter(1, Mark{Step: "l1", Loads: []LoadValue{{Name: "pan", Kilogram: kg(12.4), Newton: 121.6, Shown: "12.40 kg"}, {Name: "end", Newton: 50, Shown: "50 N"}}}); id != "m1" {
		t.Errorf("the first id is %q", id)
	}
	enter(2, Mark{Note: "moved the lamp\nand \"the\" stool C:\\", By: "Ann"})
	enter(3, Mark{Gauge: "mid", Act: "zeroed"})
	enter(4, Mark{Step: "bare", Time: minute(2).Wall})
	if id := enter(5, Mark{Withdraw: "m3", Why: "wrong gauge"}); id != "" {
		t.Errorf("a withdrawal has the id %q", id)
	}
	text, err := os.ReadFile(filepath.Join(d.Path(), "marks.lp"))
	must(t, err)
	var lines []string
	for line := range strings.Lines(string(text)) {
		if !strings.HasPrefix(line, "#") {
			lines = append(lines, strings.TrimSuffix(line, "\n"))
		}
	}
	want := []string{
		`load,name=pan by="",id="m1",kilogram=12.4,newton=121.6,shown="12.40 kg",step="l1" 1790000060000000000`,
		`load,name=end by="",id="m1",newton=50,shown="50 N",step="l1" 1790000060000000000`,
		`note by="Ann",id="m2",n=1i,text="moved the lamp and \"the\" stool C:\\ " 1790000120000000000`,
		`touch,gauge=mid act="zeroed",by="",id="m3",n=1i 1790000180000000000`,
		// The same moment as the note's: a nanosecond later, or a server would join them.
		`step by="",id="m4",n=1i,name="bare" 1790000120000000001`,
		`withdraw by="",id="m3",n=1i,why="wrong gauge" 1790000300000000000`,
	}
	if diff := cmp.Diff(want, lines); diff != "" {
		t.Errorf("marks.lp (-want +got):\n%s", diff)
	}
	dec := lineprotocol.NewDecoderWithBytes(text)
	n := 0
	for dec.Next() {
		if _, err := dec.Measurement(); err != nil {
			t.Errorf("line-protocol/v2 does not take it: %v", err)
		}
		n++
	}
	if n != len(want) {
		t.Errorf("line-protocol/v2 counts %d lines", n)
	}
	marks, err := ListMarks(d.FS())
	must(t, err)
	wantMarks := []Mark{
		{ID: "m1", Time: minute(1).Wall, Step: "l1", Loads: []LoadValue{{"pan", kg(12.4), 121.6, "12.40 kg"}, {"end", nil, 50, "50 N"}}},
		{ID: "m2", Time: minute(2).Wall, By: "Ann", Note: `moved the lamp and "the" stool C:\ `},
		{ID: "m3", Time: minute(3).Wall, Gauge: "mid", Act: "zeroed"},
		{ID: "m4", Time: minute(2).Wall + 1, Step: "bare"},
		{Time: minute(5).Wall, Withdraw: "m3", Why: "wrong gauge"},
	}
	if diff := cmp.Diff(wantMarks, marks); diff != "" {
		t.Errorf("ListMarks (-want +got):\n%s", diff)
	}
	if w := Withdrawn(marks); len(w) != 1 || w["m3"] != "wrong gauge" {
		t.Errorf("Withdrawn: %v", w)
	}
}

func TestWrongMarksAreRefused(t *testing.T) {
	d := markedRun(t)
	for name, m := range map[string]Mark{
		"nothing":           {},
		"unknown act":       {Gauge: "mid", Act: "painted"},
		"act without gauge": {Act: "zeroed"},
		"withdraw nothing":  {Withdraw: "m9", Why: "x"},
		"withdraw no why":   {Withdraw: "m1"},
		"year 1970":         {Note: "x", Time: 5},
		"in two days":       {Note: "x", Time: testStart.Wall + int64(48*time.Hour)},
		"load twice":        {Loads: []LoadValue{{Name: "a"}, {Name: "a"}}},
	} {
		if id, err := d.AppendMark(m, clockAt(testStart)); err == nil {
			t.Errorf("%s: taken as %s", name, id)
		}
	}
	if marks, err := ListMarks(d.FS()); err != nil || len(marks) > 0 {
		t.Errorf("refused marks left %v, %v", marks, err)
	}
}

func TestMarksFromManyShells(t *testing.T) {
	d := markedRun(t)
	const each, shells = 5, 6
	var wg sync.WaitGroup
	for s := range shells {
		wg.Go(func() {
			for i := range each {
				if _, err := d.AppendMark(Mark{Note: fmt.Sprintf("%d of %d", i, s)}, clockAt(testStart)); err != nil {
					t.Error(err)
				}
			}
		})
	}
	wg.Wait()
	marks, err := ListMarks(d.FS())
	must(t, err)
	ids, times := map[string]bool{}, map[int64]bool{}
	for _, m := range marks {
		ids[m.ID], times[m.Time] = true, true
	}
	if len(ids) != each*shells || len(times) != each*shells {
		t.Errorf("%d ids and %d times of %d marks", len(ids), len(times), each*shells)
	}
}

func TestMarkTailFindsEachMarkOnce(t *testing.T) {
	d := markedRun(t)
	_, err := d.AppendMark(Mark{Note: "before"}, clockAt(testStart))
	must(t, err)
	tail, err := NewMarkTail(d.FS())
	must(t, err)
	var seen []string
	for i := range 4 {
		fresh, err := tail.Poll()
		must(t, err)
		for _, m := range fresh {
			seen = append(seen, m.Note)
		}
		_, err = d.AppendMark(Mark{Note: fmt.Sprint("note ", i)}, clockAt(testStart))
		must(t, err)
	}
	// A line that is being written is no mark yet.
	path := filepath.Join(d.Path(), "marks.lp")
	f, err := os.OpenFile(path, os.O_APPEND|os.O_WRONLY, 0)
	must(t, err)
	_, err = f.WriteString(`note by="",id="m9",n=1i,text="half" 17900000`)
	must(t, err)
	must(t, f.Close())
	fresh, err := tail.Poll()
	must(t, err)
	for _, m := range fresh {
		seen = append(seen, m.Note)
	}
	if d := cmp.Diff([]string{"note 0", "note 1", "note 2", "note 3"}, seen); d != "" {
		t.Errorf("found (-want +got):\n%s", d)
	}
}

func TestMarksFileIsSharedWithTheGroup(t *testing.T) {
	d := markedRun(t)
	must(t, os.Chmod(d.Path(), 0o775))
	_, err := d.AppendMark(Mark{Note: "x"}, clockAt(testStart))
	must(t, err)
	info, err := os.Stat(filepath.Join(d.Path(), "marks.lp"))
	must(t, err)
	if info.Mode()&0o060 != 0o060 {
		t.Errorf("marks.lp has mode %v in a folder the group may write", info.Mode())
	}
}
