package round

import (
	"errors"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

const day = int64(86400e9)

// creeping is a board that sags by 0.05 mm a day.
func creeping(name string, from float64, n int) Board {
	b := Board{Name: name, Gauge: "mid", Resolution: 0.01}
	for i := range n {
		b.Before = append(b.Before, Reading{At: int64(i) * day, MM: from + 0.05*float64(i)})
	}
	return b
}

type kept struct {
	got  []Taken
	fail error
}

func (k *kept) settle(t Taken) error {
	if k.fail != nil {
		return k.fail
	}
	k.got = append(k.got, t)
	return nil
}

func take(t *testing.T, w *Walk, mm float64, wantQuestion string) {
	t.Helper()
	q, err := w.Take(Reading{At: 20 * day, MM: mm}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if wantQuestion == "" && q != "" || !strings.Contains(q, wantQuestion) {
		t.Fatalf("%v: question %q, want %q", mm, q, wantQuestion)
	}
}

func TestWalk(t *testing.T) {
	k := &kept{}
	w := New([]Board{creeping("a", 1, 10), creeping("b", 5, 10), {Name: "c", Gauge: "mid", Resolution: 0.01}}, k.settle)
	take(t, w, 1.50, "")
	if len(k.got) != 0 {
		t.Fatal("settled before the next was taken")
	}
	take(t, w, 1.45, "it is what a showed") // still standing before board a
	take(t, w, 8.00, "+2.55 mm from its last, 5.45 mm 11 d ago")
	take(t, w, 8.01, "") // pressed again: it is really there
	if len(k.got) != 1 || k.got[0].MM != 1.50 || k.got[0].Board != 0 {
		t.Fatalf("settled %+v", k.got)
	}
	if what, ok := w.Back(); !ok || what != "8.01 mm of b" {
		t.Fatalf("took back %q", what)
	}
	if _, ok := w.Back(); ok {
		t.Fatal("took back what is stored")
	}
	take(t, w, 9.99, "+4.54")
	if err := w.Keep(); err != nil {
		t.Fatal(err)
	}
	if err := w.Keep(); err == nil {
		t.Fatal("kept a reading that nobody questioned")
	}
	take(t, w, 77, "") // a board without a past
	if b, _ := w.Board(); b != nil {
		t.Fatalf("board %s is left", b.Name)
	}
	if _, err := w.Take(Reading{}, nil); err == nil {
		t.Error("took a reading without a board")
	}
	if err := errors.Join(w.Finish(), w.Finish()); err != nil {
		t.Fatal(err)
	}
	if len(k.got) != 3 || k.got[1].MM != 9.99 || k.got[2].MM != 77 {
		t.Fatalf("settled %+v", k.got)
	}
}

func TestAllowed(t *testing.T) {
	changed := creeping("a", 1, 10)
	changed.Changed = true
	for _, c := range []struct {
		name string
		b    Board
		mm   float64
		ask  bool
	}{
		{"ordinary creep", creeping("a", 1, 10), 1.50, false},
		{"three times the greatest change", creeping("a", 1, 10), 1.59, false},
		{"more", creeping("a", 1, 10), 1.61, true},
		{"less than before", creeping("a", 1, 10), 1.20, true},
		{"a load was changed since", changed, 9, false},
		{"hardly known", creeping("a", 1, 2), 2.0, false},
		{"hardly known, far", creeping("a", 1, 2), 2.1, true},
		{"flat", Board{Resolution: 0.01, Before: []Reading{{0, 1}, {1, 1}, {2, 1}, {3, 1}}}, 1.1, false},
		{"flat, moved", Board{Resolution: 0.01, Before: []Reading{{0, 1}, {1, 1}, {2, 1}, {3, 1}}}, 1.11, true},
	} {
		w := New([]Board{c.b}, (&kept{}).settle)
		q, err := w.Take(Reading{At: 20 * day, MM: c.mm}, nil)
		if err != nil || (q != "") != c.ask {
			t.Errorf("%s: question %q, %v", c.name, q, err)
		}
	}
}

// TestFullDisk: a reading that cannot be stored is not lost.
func TestFullDisk(t *testing.T) {
	k := &kept{fail: errors.New("no room")}
	w := New([]Board{{Name: "a"}, {Name: "b"}}, k.settle)
	take(t, w, 1, "")
	if _, err := w.Take(Reading{MM: 2}, nil); err == nil {
		t.Fatal("no error")
	}
	if err := w.Skip(); err == nil {
		t.Fatal("skipped over a reading that is not stored")
	}
	k.fail = nil
	take(t, w, 2, "")
	if err := w.Finish(); err != nil || len(k.got) != 2 {
		t.Fatalf("%v, %+v", err, k.got)
	}
}

// TestOrder: whatever is pressed, each board is settled at most once and in order.
func TestOrder(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.IntRange(1, 6).Draw(rt, "boards")
		var boards []Board
		for range n {
			boards = append(boards, creeping("x", 1, rapid.IntRange(0, 5).Draw(rt, "before")))
		}
		k := &kept{}
		w := New(boards, k.settle)
		for range rapid.IntRange(0, 30).Draw(rt, "presses") {
			switch rapid.IntRange(0, 4).Draw(rt, "what") {
			case 0:
				_ = w.Keep()
			case 1:
				w.Back()
			case 2:
				_ = w.Skip()
			default:
				_, _ = w.Take(Reading{At: day, MM: rapid.Float64Range(0, 3).Draw(rt, "mm")}, nil)
			}
		}
		if err := w.Finish(); err != nil {
			rt.Fatal(err)
		}
		for i := 1; i < len(k.got); i++ {
			if k.got[i].Board <= k.got[i-1].Board {
				rt.Fatalf("settled %+v", k.got)
			}
		}
	})
}
