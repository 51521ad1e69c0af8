package live

import (
	"bytes"
	"encoding/json"
	"flag"
	stdhtml "html"
	"html/template"
	"os"
	"regexp"
	"strings"
	"testing"

	"gaugelog/ingest"
	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

var update = flag.Bool("update", false, "write the golden files again")

// wholePage is the whole page of a snapshot.
func wholePage(t testing.TB, d *desk.Desk, s *desk.Snapshot, known bool) string {
	t.Helper()
	v := sectionView{answer.Of(d, s), known, "/r/slat-3/", plotsOf(d, s)}
	parts := map[string]template.HTML{}
	for _, id := range sections {
		var b bytes.Buffer
		if err := templates.ExecuteTemplate(&b, id, v); err != nil {
			t.Fatal(err)
		}
		parts[id] = template.HTML(b.String())
	}
	var b bytes.Buffer
	if err := templates.ExecuteTemplate(&b, "page", view{Title: answer.TitleOf(d), Path: v.Path, Parts: parts, Known: known, Forms: formsOf(d, s)}); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestGoldenPage(t *testing.T) {
	d, s := desktest.Morning(t)
	got := wholePage(t, d, s, true)
	const golden = "testdata/morning.golden.html"
	if *update {
		if err := os.MkdirAll("testdata", 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(golden, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if got != string(want) {
		t.Errorf("the page differs from %s; look at it, then run go test -update", golden)
	}
}

// The page answers the five questions first and in this order, and calls
// uncorrected what is.
func TestTheQuestionsComeFirst(t *testing.T) {
	d, s := desktest.Morning(t)
	page := stdhtml.UnescapeString(wholePage(t, d, s, false))
	at := 0
	for _, want := range []string{
		"Is it alive?", "Not wholly: 2 of 4 instruments answer", "Was it knocked overnight?", "Yes: 1 disturbance since yesterday 07:14", "02:14: a gauge was knocked (mid), −0.012 mm",
		"How much travel is left?", "6.888 mm at mid, 54 % of its travel", "18 Oct 2026", "What changed since yesterday?", "+0.031 mm at mid in 24 h", "4.312 mm at mid, uncorrected; 4.309 mm corrected",
		"Is it speeding up?", "No: slowing down", "+0.031 mm in the last 24 h, +0.044 mm in the 24 h before, uncorrected", "Under load", "Step l1: pan 12.40 kg", "For 8 d",
		"Plots", "Sag against log time", "sag, mm, uncorrected", "Forecast, and may we stop?", "more than two decades of time beyond the data", "Another 7 d", "Gauges", "The room", "20.3 °C",
		"Alarms", "no safety device", "Last sync to disk", "4.0 s ago", "12 GB free", "kept by a time source", "Last mark", "step l1, pan 12.40 kg", "Begin a step", "Marks entered", "Withdrawn: another rig",
	} {
		i := strings.Index(page[at:], want)
		if i < 0 {
			t.Fatalf("%q does not stand behind %q", want, page[max(0, at-80):at])
		}
		at += i
	}
	if strings.Contains(page, "NaN") || strings.Contains(page, "Inf") {
		t.Error("something is not a number")
	}
}

// Where nothing is known the page says so, and draws nothing.
func TestPageOfNothing(t *testing.T) {
	d, s := desktest.Morning(t)
	empty := &desk.Snapshot{At: s.At, Status: &ingest.Status{DiskFree: -1}, Curves: &desk.Curves{Series: make([]desk.Curve, 5)}, Loads: desk.Loads{Planned: -1}}
	page := wholePage(t, d, empty, true)
	for _, want := range []string{"The recording is starting", "Not looked at yet", "The rig file states no travel", "Nothing to compare yet", "Too early to say", "No load is entered", "Nothing to draw yet", "not answered yet"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	if strings.Contains(page, "NaN") || strings.Contains(page, "Inf") {
		t.Error("something is not a number")
	}
}

// Every coloured mark carries a word (IEC 60073: colour never stands alone).
func TestColoursCarryWords(t *testing.T) {
	d, s := desktest.Morning(t)
	for _, m := range regexp.MustCompile(`<span class="tone (\w+)">([^<]*)</span>`).FindAllStringSubmatch(wholePage(t, d, s, true), -1) {
		if m[2] == "" {
			t.Errorf("a %s mark has no word", m[1])
		}
	}
}

func TestSizeOfThePlots(t *testing.T) {
	d, s := desktest.Morning(t)
	svg := string(plotsOf(d, s))
	if len(svg) > 40_000 {
		t.Errorf("the plots of two gauges take %d bytes", len(svg))
	}
	if len(wholePage(t, d, s, true)) > 80_000 {
		t.Error("the page takes more than 80 kB")
	}
	t.Logf("plots %d bytes, page %d bytes", len(svg), len(wholePage(t, d, s, true)))
}

func BenchmarkPage(b *testing.B) {
	d, s := desktest.Morning(b)
	for b.Loop() {
		wholePage(b, d, s, true)
	}
}

// What is sent to a terminal elsewhere can always be written as JSON, which knows
// no infinite numbers.
func TestWhatIsSentIsJSON(t *testing.T) {
	d, s := desktest.Morning(t)
	bare := *s
	bare.Curves = &desk.Curves{Series: s.Curves.Series[:3:3]} // no probe, no load
	empty := &desk.Snapshot{At: s.At, Status: &ingest.Status{DiskFree: -1}, Curves: &desk.Curves{Series: make([]desk.Curve, 5)}, Loads: desk.Loads{Planned: -1}}
	for name, s := range map[string]*desk.Snapshot{"morning": s, "without a probe or a load": &bare, "empty": empty} {
		for _, what := range []any{answer.Of(d, s), answer.Figures(d, s)} {
			if _, err := json.Marshal(what); err != nil {
				t.Errorf("%s: %v", name, err)
			}
		}
	}
}
