package evaluate

import (
	"fmt"
	"maps"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// everything lists what a run can offer, by the names Clause.Inputs uses.
func everything(f *Facts) []string {
	var out []string
	for name, q := range catalogue {
		if q.of(f) != nil {
			out = append(out, name)
		}
	}
	for _, r := range f.Sag {
		out = append(out, "sag("+timeText(r.AfterS)+")")
	}
	for _, r := range f.Recovered {
		out = append(out, "recovered("+timeText(r.AfterS)+")")
	}
	for name := range f.Details {
		out = append(out, "details."+name)
	}
	slices.Sort(out)
	return out
}

// spoil takes one input away, in one of the ways it may be missing.
func spoil(f *Facts, input string, way int) {
	if name, ok := strings.CutPrefix(input, "details."); ok {
		if way == 0 {
			delete(f.Details, name)
		} else {
			f.Details[name] = []string{"", "many", "3 parsecs"}[way-1]
		}
		return
	}
	spoilReading := func(list []Reading, name string) []Reading {
		for i := range list {
			if name+"("+timeText(list[i].AfterS)+")" != input {
				continue
			}
			switch way {
			case 0:
				return slices.Delete(slices.Clone(list), i, i+1)
			case 1:
				list[i].Modelled = true
			case 2:
				list[i].Value = math.NaN()
			default:
				list[i].Value = math.Inf(1)
			}
		}
		return list
	}
	f.Sag, f.Recovered = spoilReading(f.Sag, "sag"), spoilReading(f.Recovered, "recovered")
	q, ok := catalogue[input]
	if !ok || input == "kdef" {
		if input == "kdef" {
			f.Details["service_class"] = "9"
		}
		return
	}
	gone := q.of(f)
	v := reflect.ValueOf(f).Elem()
	for i := range v.NumField() {
		if p, ok := v.Field(i).Interface().(*Quantity); ok && p == gone {
			if way == 0 {
				v.Field(i).SetZero()
			} else {
				v.Field(i).Set(reflect.ValueOf(&Quantity{Value: []float64{math.NaN(), math.Inf(1), math.Inf(-1)}[way-1]}))
			}
		}
	}
}

// TestNothingMissingInFull holds the other tests' ground: with full facts
// every clause is measured, so that taking one thing away is what undoes it.
func TestNothingMissingInFull(t *testing.T) {
	for _, o := range Run(BuiltIn(), full()) {
		if o.Measured == nil && o.Clause != "reading-times" {
			t.Errorf("%s %s: %s", o.Rule, o.Clause, o.Why)
		}
	}
}

// TestMissingNeverPasses takes any inputs away, in any of the ways they may be
// missing: no clause that needs one of them may be decided.
func TestMissingNeverPasses(t *testing.T) {
	names := everything(full())
	rapid.Check(t, func(t *rapid.T) {
		f := full()
		gone := map[string]bool{}
		for range rapid.IntRange(1, 6).Draw(t, "how many") {
			name := rapid.SampledFrom(names).Draw(t, "gone")
			if gone[name] {
				continue
			}
			gone[name] = true
			spoil(f, name, rapid.IntRange(0, 3).Draw(t, "way"))
		}
		if gone["kdef"] {
			gone["details.service_class"] = true
		}
		for _, r := range BuiltIn() {
			for i := range r.Clauses {
				c := &r.Clauses[i]
				for _, each := range append(c.Each, "")[:max(1, len(c.Each))] {
					o := r.outcome(c, f, each)
					if needs := slices.DeleteFunc(c.Inputs(r, each), func(n string) bool { return !gone[n] }); len(needs) > 0 {
						if o.Pass != nil {
							t.Fatalf("%s %s decided (%v) without %v: %s", r.Name, o.Clause, *o.Pass, needs, o.Why)
						}
						if !strings.HasPrefix(o.Why, "cannot evaluate: ") {
							t.Fatalf("%s %s does not say that %v is missing: %s", r.Name, o.Clause, needs, o.Why)
						}
					}
				}
			}
		}
	})
}

func TestEmptyRunDecidesNothing(t *testing.T) {
	for _, o := range Run(BuiltIn(), &Facts{}) {
		if o.Pass != nil || o.Measured != nil || !strings.HasPrefix(o.Why, "cannot evaluate: ") || !strings.HasSuffix(o.Why, Informative) {
			t.Errorf("%+v", o)
		}
	}
}

// A division by a measured zero is missing, not infinite.
func TestZeroSag(t *testing.T) {
	f := full()
	f.EndSag = Measured(0, 0.001)
	o := only(Run(ruled("span-over-sag"), f), "end")
	if o.Pass != nil || o.Measured != nil || !strings.Contains(o.Why, "divides by zero") {
		t.Errorf("%+v", o)
	}
}

func TestReadingTimes(t *testing.T) {
	const day = 86400.0
	for _, c := range []struct {
		name   string
		change func(*Facts)
		pass   string
		says   string
	}{
		{"all", func(f *Facts) { f.ReadAt = []float64{60.5, 30 * day, 61 * day, 90 * day} }, "yes", "holds"},
		{"one missed", func(f *Facts) { f.ReadAt = []float64{60.5, 30 * day, 90 * day} }, "no", "missed: 60 d"},
		{"one too far", func(f *Facts) { f.ReadAt = []float64{62, 30 * day, 60 * day, 90 * day} }, "no", "missed: 1 min"},
		{"not reached", func(f *Facts) { f.Duration = Exactly(70 * day); f.ReadAt = []float64{60, 30 * day, 60 * day} }, "open", "not reached: 90 d"},
		{"missed and not reached", func(f *Facts) { f.Duration = Exactly(70 * day); f.ReadAt = []float64{60, 60 * day} }, "no", "missed: 30 d"},
		{"no readings", func(f *Facts) { f.ReadAt = nil }, "open", "cannot evaluate"},
		{"no step", func(f *Facts) { f.Duration = nil }, "open", "cannot evaluate"},
	} {
		f := full()
		c.change(f)
		o := only(Run(ruled("astm-d6815"), f), "reading-times")
		if say(o.Pass) != c.pass || !strings.Contains(o.Why, c.says) {
			t.Errorf("%s: %s, want %s with %q: %s", c.name, say(o.Pass), c.pass, c.says, o.Why)
		}
	}
}

// Determinations never decide a figure, and every figure says so; what rests
// on memory says that it must be confirmed; low confidence decides nothing.
func TestConfidenceIsTold(t *testing.T) {
	for _, r := range BuiltIn() {
		for i := range r.Clauses {
			c := &r.Clauses[i]
			for _, each := range append(c.Each, "")[:max(1, len(c.Each))] {
				o, weakest := r.outcome(c, full(), each), c.weakest(r, each)
				if strings.HasPrefix(string(weakest), "memory") && !strings.Contains(o.Why, "confirm against your copy") {
					t.Errorf("%s %s rests on memory and does not say so: %s", r.Name, o.Clause, o.Why)
				}
				if (weakest == MemoryLow || c.Part == Figure) && o.Pass != nil {
					t.Errorf("%s %s decided", r.Name, o.Clause)
				}
				if c.Part == Figure && r.Determination && !strings.Contains(o.Why, "determination only") {
					t.Errorf("%s %s: %s", r.Name, o.Clause, o.Why)
				}
			}
		}
	}
}

// The numbers of each built-in rule carry the confidence that was stated for
// them when they were written down.
func TestConfidencesAsStated(t *testing.T) {
	want := map[string]Confidence{
		"astm-d6815 ninety_days": Read, "astm-d6815 fractional_limit": MemoryMedium, "astm-d6815 load_factor": MemoryLow, "astm-d6815 least_sample": MemoryMedium,
		"en-1156 reading_accuracy": Read, "en-1156 one_minute": MemoryMedium, "en-1156 load_share": MemoryLow,
		"iso-899-2 span_ratio": MemoryMedium, "iso-899-2 thousand_hours": MemoryMedium,
		"astm-d7032 hold": MemoryLow, "astm-d7032 load_multiple": MemoryLow, "astm-d7032 least_recovery": MemoryLow,
		"shelf load_tolerance": Read,
	}
	found := map[string]Confidence{}
	for _, r := range BuiltIn() {
		for _, k := range r.Numbers {
			found[r.Name+" "+k.Name] = k.Confidence
		}
	}
	for _, name := range slices.Sorted(maps.Keys(want)) {
		if found[name] != want[name] {
			t.Errorf("%s: %q, want %q", name, found[name], want[name])
		}
	}
	if got := fmt.Sprint(Names()); got != "[astm-d6815 astm-d7032 en-1156 en-1995-kdef iso-899-2 shelf span-over-sag]" {
		t.Errorf("built-in rules: %s", got)
	}
}
