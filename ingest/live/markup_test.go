package live

import (
	"fmt"
	"math"
	"os"
	"os/exec"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"golang.org/x/net/html"
	"golang.org/x/net/html/atom"

	"gaugelog/ingest/answer"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

// everyPage renders each template, with something in everything and with nothing.
func everyPage(t *testing.T) map[string]string {
	t.Helper()
	d, s := desktest.Morning(t)
	pages := map[string]string{"known": wholePage(t, d, s, true), "stranger": wholePage(t, d, s, false)}
	empty := &desk.Snapshot{At: s.At, Status: s.Status, Curves: &desk.Curves{Series: make([]desk.Curve, 5)}, Loads: desk.Loads{Planned: -1}}
	pages["empty"] = wholePage(t, d, empty, true)
	for name, data := range map[string]any{
		"door":    doorView{Back: "/r/slat-3/", Words: "That is not the token."},
		"confirm": confirmView{Title: "Slat", Path: "/r/slat-3/", Words: "step bare", When: "now", Fields: []field{{"kind", "step"}}},
		"refusal": confirmView{Title: "Slat", Path: "/r/slat-3/", Words: "the note is empty"},
		"list":    listView{Runs: []brief{{"/r/slat-3/", "Slat", answer.Answer{Tone: answer.Normal, Short: "No alarm"}, answer.Answer{Short: "Yes"}}}},
	} {
		var b strings.Builder
		if err := templates.ExecuteTemplate(&b, name, data); err != nil {
			t.Fatal(err)
		}
		pages[name] = b.String()
	}
	return pages
}

// void are the elements that have no end (HTML, 13.1.2, void elements).
var void = map[atom.Atom]bool{atom.Area: true, atom.Base: true, atom.Br: true, atom.Col: true, atom.Embed: true, atom.Hr: true,
	atom.Img: true, atom.Input: true, atom.Link: true, atom.Meta: true, atom.Source: true, atom.Track: true, atom.Wbr: true}

// endsParagraph are elements that would end a paragraph they stand in (HTML, 4.4.1).
var endsParagraph = map[atom.Atom]bool{atom.Div: true, atom.Dl: true, atom.Details: true, atom.Figure: true, atom.Form: true, atom.H1: true, atom.H2: true,
	atom.Header: true, atom.Main: true, atom.P: true, atom.Section: true, atom.Table: true, atom.Ul: true, atom.Ol: true}

// Every page nests its elements and ends them, has each id once,
// labels its inputs and names its pictures.
func TestMarkupIsWellFormed(t *testing.T) {
	for name, page := range everyPage(t) {
		if err := wellFormed(page); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if !strings.HasPrefix(page, "<!DOCTYPE html>") || !strings.Contains(page, `<html lang="en">`) || !strings.Contains(page, "<title>") {
			t.Errorf("%s has no document type, language or title", name)
		}
	}
	for _, wrong := range []string{"<p><b>x</p></b>", "<p>", `<a id="x"></a><b id="x"></b>`, "<p><div></div></p>", `<input name="x">`, "<svg></svg>", "</p>"} {
		if wellFormed(wrong) == nil {
			t.Errorf("%q passes", wrong)
		}
	}
}

func wellFormed(page string) error {
	z := html.NewTokenizer(strings.NewReader(page))
	var open []string
	ids := map[string]bool{}
	for {
		kind := z.Next()
		token := z.Token()
		switch kind {
		case html.ErrorToken:
			if len(open) > 0 {
				return fmt.Errorf("%v never end", open)
			}
			return nil
		case html.StartTagToken, html.SelfClosingTagToken:
			if err := checkTag(token, open, ids); err != nil {
				return err
			}
			if kind == html.StartTagToken && !void[token.DataAtom] {
				open = append(open, token.Data)
			}
		case html.EndTagToken:
			if len(open) == 0 || open[len(open)-1] != token.Data {
				return fmt.Errorf("</%s> ends what is open: %v", token.Data, open)
			}
			open = open[:len(open)-1]
		}
	}
}

func checkTag(token html.Token, open []string, ids map[string]bool) error {
	has := map[string]string{}
	for _, a := range token.Attr {
		has[a.Key] = a.Val
	}
	if id, ok := has["id"]; ok {
		if ids[id] {
			return fmt.Errorf("the id %q stands twice", id)
		}
		ids[id] = true
	}
	inside := func(name string) bool { return slices.Contains(open, name) }
	switch {
	case endsParagraph[token.DataAtom] && inside("p"):
		return fmt.Errorf("<%s> stands in a paragraph", token.Data)
	case (token.Data == "input" || token.Data == "select") && has["type"] != "hidden" && !inside("label"):
		return fmt.Errorf("%s has no label", token)
	case token.Data == "svg" && (has["role"] != "img" || has["aria-label"] == ""):
		return fmt.Errorf("a plot has no name")
	case token.Data == "form" && inside("form"):
		return fmt.Errorf("a form stands in a form")
	case token.Data == "th" && has["scope"] == "":
		return fmt.Errorf("a head cell has no scope")
	case (token.Data == "a" || token.Data == "button") && (inside("a") || inside("button")):
		return fmt.Errorf("<%s> stands in what is pressed itself", token.Data)
	}
	return nil
}

// Debian's tidy finds no fault either; it does not know that a dl may hold divs
// (HTML, 4.4.9).
func TestMarkupByTidy(t *testing.T) {
	path, err := exec.LookPath("tidy")
	if err != nil {
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatal("tidy is not installed, and the continuous integration must have it")
		}
		t.Skip("tidy is not installed")
	}
	known := regexp.MustCompile(`<d[ldt]>|</?div>|^$`)
	for name, page := range everyPage(t) {
		cmd := exec.Command(path, "-q", "-e", "-utf8")
		cmd.Stdin = strings.NewReader(page)
		said, _ := cmd.CombinedOutput() // exits with 1 for warnings
		for line := range strings.SplitSeq(string(said), "\n") {
			if !known.MatchString(line) {
				t.Errorf("%s: %s", name, line)
			}
		}
	}
}

// Text has a contrast of at least 4.5 to what it stands on (WCAG 2.2, 1.4.3,
// level AA) in light and in dark; curves and edges of what is pressed have 3
// (1.4.11).
func TestContrast(t *testing.T) {
	sheet, err := assets.ReadFile("page.css")
	if err != nil {
		t.Fatal(err)
	}
	light, rest, _ := strings.Cut(string(sheet), "@media (prefers-color-scheme: dark)")
	dark, _, _ := strings.Cut(rest, "* { box-sizing")
	pairs := []struct {
		over, under string
		least       float64
	}{
		{"ink", "paper", 4.5}, {"ink", "sheet", 4.5}, {"soft", "paper", 4.5}, {"soft", "sheet", 4.5}, {"deed", "sheet", 4.5}, {"deed", "paper", 4.5},
		{"deed-ink", "deed", 4.5}, {"normal", "sheet", 4.5}, {"normal", "paper", 4.5}, {"abnormal-ink", "abnormal-back", 4.5}, {"on-tone", "danger", 4.5},
		{"danger", "sheet", 3}, {"c0", "sheet", 3}, {"c1", "sheet", 3}, {"c2", "sheet", 3}, {"c3", "sheet", 3}, {"c4", "sheet", 3}, {"c5", "sheet", 3}, {"c6", "sheet", 3}, {"c7", "sheet", 3},
	}
	for name, block := range map[string]string{"light": light, "dark": dark} {
		colours := map[string]float64{}
		for _, m := range regexp.MustCompile(`--([a-z0-9-]+): #([0-9a-f]{6})`).FindAllStringSubmatch(block, -1) {
			v, err := strconv.ParseUint(m[2], 16, 32)
			if err != nil {
				t.Fatal(err)
			}
			colours[m[1]] = luminance(v)
		}
		for _, p := range pairs {
			over, has := colours[p.over]
			under, too := colours[p.under]
			if !has || !too {
				t.Errorf("%s does not set %s and %s", name, p.over, p.under)
				continue
			}
			if got := (max(over, under) + 0.05) / (min(over, under) + 0.05); got < p.least {
				t.Errorf("%s: %s on %s has a contrast of %.2f, want %.1f", name, p.over, p.under, got, p.least)
			}
		}
	}
	if got := (luminance(0xffffff) + 0.05) / (luminance(0) + 0.05); math.Abs(got-21) > 1e-9 {
		t.Errorf("white on black is %v, WCAG says 21", got)
	}
}

// luminance is the relative luminance of WCAG 2.2.
func luminance(rgb uint64) float64 {
	sum := 0.0
	for i, weight := range []float64{0.0722, 0.7152, 0.2126} {
		v := float64(rgb>>(8*i)&0xff) / 255
		if v <= 0.04045 {
			v /= 12.92
		} else {
			v = math.Pow((v+0.055)/1.055, 2.4)
		}
		sum += weight * v
	}
	return sum
}
