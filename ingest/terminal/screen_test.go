package terminal

import (
	"errors"
	"flag"
	"fmt"
	"os"
	"regexp"
	"strings"
	"testing"

	tea "charm.land/bubbletea/v2"
	"charm.land/lipgloss/v2"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk/desktest"
)

var update = flag.Bool("update", false, "write the golden files again")

// morning is a model that has received a frame with something in everything.
func morning(t testing.TB, width, height int) *Model {
	t.Helper()
	d, s := desktest.Morning(t)
	m := &Model{width: width, height: height, see: func(int, string) error { return nil }}
	m.Update(frameMsg(cleaned(Frame{View: answer.Of(d, s), Figures: answer.Figures(d, s)})))
	m.Update(tea.WindowSizeMsg{Width: width, Height: height})
	return m
}

func press(m *Model, keys string) tea.Cmd {
	var cmd tea.Cmd
	for _, k := range keys {
		_, cmd = m.Update(tea.KeyPressMsg{Code: k, Text: string(k)})
	}
	return cmd
}

var steering = regexp.MustCompile("\x1b\\[[0-9;]*m")

// bare is a screen without its looks; it fails where anything else steers.
func bare(t testing.TB, m *Model) string {
	t.Helper()
	text := steering.ReplaceAllString(m.screen(), "")
	if strings.ContainsRune(text, '\x1b') {
		t.Errorf("the screen holds a sequence that is no look: %q", text)
	}
	lines := strings.Split(text, "\n")
	if len(lines) != m.height {
		t.Errorf("the screen of %d rows has %d", m.height, len(lines))
	}
	for i, l := range lines {
		if w := lipgloss.Width(l); w > m.width {
			t.Errorf("row %d is %d wide, the screen %d: %q", i+1, w, m.width, l)
		}
		lines[i] = strings.TrimRight(l, " ")
	}
	return strings.Join(lines, "\n")
}

// Every page at a phone's, a plain and a large terminal's size.
func TestGoldenScreens(t *testing.T) {
	for _, size := range [][2]int{{40, 15}, {80, 24}, {160, 50}} {
		name := fmt.Sprintf("%dx%d", size[0], size[1])
		var b strings.Builder
		m := morning(t, size[0], size[1])
		for i, page := range pageNames {
			press(m, page[:1])
			fmt.Fprintf(&b, "== %s\n%s\n", page, bare(t, m))
			if i == int(plot) {
				press(m, "nt")
				fmt.Fprintf(&b, "== plot, next gauge, even time\n%s\n", bare(t, m))
			}
		}
		golden := "testdata/" + name + ".golden.txt"
		if *update {
			if err := os.MkdirAll("testdata", 0o755); err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(golden, []byte(b.String()), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		want, err := os.ReadFile(golden)
		if err != nil {
			t.Fatal(err)
		}
		if b.String() != string(want) {
			t.Errorf("the screens differ from %s; look at them, then run go test -update", golden)
		}
	}
}

// No size breaks a screen, not even one that is hardly a terminal, with a frame
// or before any.
func TestAnySize(t *testing.T) {
	for _, m := range []*Model{morning(t, 1, 1), {width: 1, height: 1}} {
		for _, width := range []int{1, 2, 7, 19, 30, 61, 62, 119, 120, 121, 300} {
			for _, height := range []int{1, 2, 3, 5, 9, 20, 80} {
				m.Update(tea.WindowSizeMsg{Width: width, Height: height})
				for _, page := range pageNames {
					press(m, page[:1])
					bare(t, m)
					m.scroll = 1000
					bare(t, m)
				}
			}
		}
	}
}

// The keys that are shown do what they say.
func TestKeys(t *testing.T) {
	m := morning(t, 80, 24)
	m.by = "mo"
	if cmd := press(m, "q"); cmd == nil || cmd() != (tea.QuitMsg{}) {
		t.Error("q does not quit")
	}
	m.Update(tea.KeyPressMsg{Code: tea.KeyRight})
	if m.page != plot {
		t.Errorf("the right arrow leads to %s", pageNames[m.page])
	}
	m.Update(tea.KeyPressMsg{Code: tea.KeyLeft})
	m.Update(tea.KeyPressMsg{Code: tea.KeyLeft})
	if m.page != recording {
		t.Errorf("the left arrow leads to %s", pageNames[m.page])
	}
	var seen string
	m.see = func(id int, by string) error { seen = fmt.Sprint(id, by); return nil }
	if press(m, "s") != nil {
		t.Error("an alarm is noted as seen from a page that does not show it")
	}
	press(m, "a")
	m.Update(press(m, "s")())
	if seen != "3mo" && seen != "3 mo" {
		t.Errorf("noted as seen was %q", seen)
	}
	if text := bare(t, m); !strings.Contains(text, "Noted as seen: silent.") {
		t.Errorf("the screen does not say that the alarm is noted as seen:\n%s", text)
	}
	m.see = func(int, string) error { return errors.New("no token\x1b[2J") }
	m.Update(press(m, "s")())
	if text := bare(t, m); !strings.Contains(text, "Not noted as seen: no token[2J.") {
		t.Errorf("the screen does not say why:\n%s", text)
	}
	press(m, "r")
	if strings.Contains(bare(t, m), "Not noted") {
		t.Error("a message stays behind its page")
	}
	m.Update(tea.WindowSizeMsg{Width: 40, Height: 15})
	press(m, "g")
	top := bare(t, m)
	m.Update(tea.KeyPressMsg{Code: tea.KeyDown})
	if bare(t, m) == top {
		t.Error("the down arrow does not scroll")
	}
	m.Update(tea.KeyPressMsg{Code: tea.KeyUp})
	if bare(t, m) != top {
		t.Error("the up arrow does not lead back")
	}
}

// Whatever colour there is, its word stands in it; and the colours are those of
// their meanings alone.
func TestColoursCarryWords(t *testing.T) {
	m := morning(t, 160, 50)
	words := map[string]map[string]bool{
		looks[normal].Render("x"):   {"[normal]": true, "[answers]": true},
		looks[abnormal].Render("x"): {"[abnormal]": true, "[silent]": true, "[travel]": true, "[frozen]": true},
		looks[danger].Render("x"):   {"[danger]": true},
	}
	coloured := 0
	for _, page := range pageNames {
		press(m, page[:1])
		screen := m.screen()
		for look, allowed := range words {
			open, _, _ := strings.Cut(look, "x")
			for _, part := range strings.Split(screen, open)[1:] {
				word, _, _ := strings.Cut(part, "\x1b")
				if coloured++; !allowed[word] {
					t.Errorf("%s: %q is coloured as %q", page, word, open)
				}
			}
		}
		for _, code := range regexp.MustCompile(`\x1b\[([0-9;]*)m`).FindAllStringSubmatch(screen, -1) {
			switch code[1] {
			case "", "0", "1", "2", "32", "30;43", "1;97;41":
			default:
				t.Errorf("%s: a look of its own: %q", page, code[1])
			}
		}
	}
	if coloured < 10 {
		t.Errorf("only %d coloured words", coloured)
	}
}

// What a gauge, a rig or a server says cannot steer the terminal.
func TestHostileTexts(t *testing.T) {
	evil := "\x1b]0;owned\x07\x1b[2J\u009b31m\u202ereversed\u2028\r\nnext\tA\x00\x7f"
	m := morning(t, 80, 24)
	f := m.frame
	f.View.Title, f.View.Load.Headline, f.Lost = evil, evil, evil
	f.View.Gauges[0].Status, f.View.Gauges[0].Name, f.View.Alarms[0].Text = evil, evil, evil
	f.View.Marks[0].Words, f.View.Room = evil, []string{evil}
	f.View.Knocked.More = []string{evil, strings.Repeat("w", 5000)}
	f.Figures[0].Title, f.Figures[0].YLabel, f.Figures[0].Lines[0].Name = evil, evil, evil
	f.Figures[0].XTicks = append(f.Figures[0].XTicks, answer.Tick{At: 1e300, Label: evil})
	f.Figures[0].Lines[0].Points = []answer.Point{{0, -1e308}, {1e308, 1e308}, {3, 5e-324}}
	m.Update(frameMsg(cleaned(f)))
	for _, page := range pageNames {
		press(m, page[:1])
		text := bare(t, m)
		for _, r := range "\x07\x00\x7f\r\t\u009b\u202e\u2028" {
			if strings.ContainsRune(text, r) {
				t.Errorf("%s: %q stands on the screen", page, r)
			}
		}
	}
}

// A terminal without more letters gets plain ones.
func TestASCII(t *testing.T) {
	m := morning(t, 80, 24)
	m.ascii = true
	for _, page := range pageNames {
		press(m, page[:1])
		for _, r := range bare(t, m) {
			if r >= 0x80 {
				t.Errorf("%s: %q", page, r)
			}
		}
	}
	for env, want := range map[string]bool{"LANG=C": false, "LANG=de_DE.UTF-8": true, "": true, "LC_ALL=en_GB.utf8": true, "LC_CTYPE=POSIX": false} {
		if UTF8([]string{"TERM=x", env}) != want {
			t.Errorf("%q: %v", env, !want)
		}
	}
	if UTF8([]string{"LANG=C", "LC_ALL=C.UTF-8"}) != true {
		t.Error("LC_ALL does not come before LANG")
	}
}

func TestCut(t *testing.T) {
	for _, c := range []struct {
		text  string
		width int
		want  string
	}{{"sag", 3, "sag"}, {"sagging", 4, "sag…"}, {"sag", 0, ""}, {"漢字漢字", 5, "漢字…"}, {"", 5, ""}} {
		if got := cut(c.text, c.width); got != c.want {
			t.Errorf("%q cut to %d: %q, want %q", c.text, c.width, got, c.want)
		}
	}
}

func BenchmarkScreen(b *testing.B) {
	m := morning(b, 160, 50)
	b.ReportAllocs()
	for b.Loop() {
		m.screen()
	}
}
