package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"flag"
	"html"
	"image"
	"image/color"
	"image/png"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"
	"time"
	"unicode"

	"gaugelog/analysis"
	"gaugelog/config"
)

var update = flag.Bool("update", false, "write the golden files anew")

// demoResult is a fresh copy of testdata/result.json.
func demoResult(t testing.TB) *analysis.Result {
	t.Helper()
	text, err := os.ReadFile("testdata/result.json")
	if err != nil {
		t.Fatal(err)
	}
	r := &analysis.Result{}
	dec := json.NewDecoder(bytes.NewReader(text))
	dec.DisallowUnknownFields()
	if err := dec.Decode(r); err != nil {
		t.Fatal(err)
	}
	return r
}

func demoRig(t testing.TB) *config.Rig {
	t.Helper()
	rig, err := config.LoadRig("testdata/rig.yaml")
	if err != nil {
		t.Fatal(err)
	}
	return rig
}

func picture(t testing.TB, w, h int) []byte {
	t.Helper()
	m := image.NewNRGBA64(image.Rect(0, 0, w, h)) // sixteen bits a channel
	for y := range h {
		for x := range w {
			m.SetNRGBA64(x, y, color.NRGBA64{uint16(x * 999), uint16(y * 999), 0x8000, 0xffff})
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, m); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// demoOptions add what the demo has none of: a withdrawn mark, a photograph,
// an amendment, a stepped clock.
func demoOptions(t testing.TB) Options {
	at := func(s string) time.Time {
		v, err := time.Parse(time.RFC3339, s)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	return Options{
		Rig: demoRig(t),
		Marks: []Mark{
			{ID: "m1", Time: at("2026-03-02T09:00:03Z"), What: "step s1: a 2.500(1) kg b 2.500(1) kg", By: "AK"},
			{ID: "m2", Time: at("2026-03-02T09:06:02Z"), What: "a 17.5 kg", By: "AK", Withdrawn: "wrong hanger"},
			{ID: "m3", Time: at("2026-03-03T07:10:00Z"), What: "frame from the door side", By: "JB", Photo: "photos/0001.png"},
			{ID: "m4", Time: at("2026-03-03T07:11:00Z"), What: "lost picture", Photo: "photos/0002.png"},
		},
		Amendments: []config.Amendment{{Path: "specimen.mass", Value: "8.20 kg", Shown: "8.20 kg", Why: "weighed again", By: "JB", Entered: "2026-03-04T10:00:00Z"}},
		Events:     []Event{{Time: at("2026-03-05T01:00:00Z"), Kind: "clock-stepped", Detail: "by 2.1 s"}, {Time: at("2026-03-05T02:00:00Z"), Kind: "port-lost", Gauge: "tail", Detail: "the adapter went away"}},
		Files:      fstest.MapFS{"photos/0001.png": {Data: picture(t, 60, 40)}, "SHA256SUMS": {Data: []byte("00  a\n11  b\n")}},
	}
}

func render(t testing.TB, d *Document, format string) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, d, format, ""); err != nil {
		t.Fatalf("%s: %v", format, err)
	}
	return b.Bytes()
}

func TestGolden(t *testing.T) {
	d := Build(demoResult(t), demoOptions(t))
	for format, name := range map[string]string{"text": "report.txt", "md": "report.md", "csv": "report.csv"} {
		path, got := filepath.Join("testdata", name), render(t, d, format)
		if *update {
			if err := os.WriteFile(path, got, 0o644); err != nil {
				t.Fatal(err)
			}
			continue
		}
		want, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if bytes.Equal(got, want) {
			continue
		}
		g, w := strings.Split(string(got), "\n"), strings.Split(string(want), "\n")
		for i := range min(len(g), len(w)) {
			if g[i] != w[i] {
				t.Errorf("%s line %d:\n got %q\nwant %q\n(-update writes it anew)", name, i+1, g[i], w[i])
				break
			}
		}
		if len(g) != len(w) {
			t.Errorf("%s has %d lines, want %d", name, len(g), len(w))
		}
	}
}

// squeeze drops all blanks, at which writers may break lines.
func squeeze(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsSpace(r) {
			return -1
		}
		return r
	}, s)
}

var tag = regexp.MustCompile(`(?s)<style>.*?</style>|<[^>]*>`)

// plainOf is the text that a reader of a format sees.
func plainOf(t *testing.T, format string, b []byte) string {
	t.Helper()
	switch format {
	case "html":
		return html.UnescapeString(tag.ReplaceAllString(string(b), " "))
	case "md":
		return html.UnescapeString(regexp.MustCompile("\\\\([\\\\`*_\\[\\]|#~])").ReplaceAllString(string(b), "$1"))
	case "csv":
		records, err := csv.NewReader(bytes.NewReader(b)).ReadAll()
		if err != nil {
			t.Fatalf("the csv is not by RFC 4180: %v", err)
		}
		var all []string
		for _, r := range records {
			all = append(all, strings.Join(r, " "))
		}
		return strings.Join(all, "\n")
	case "pdf":
		return pdfText(t, b)
	}
	return string(b)
}

// Every writer says all that the document says: each cell, caption and
// sentence is looked for in what each format shows.
func TestSameContentInEveryFormat(t *testing.T) {
	compress = false
	defer func() { compress = true }()
	for _, units := range []string{"si", "us"} {
		o := demoOptions(t)
		o.Units = units
		d := Build(demoResult(t), o)
		for _, format := range Formats {
			shown := squeeze(plainOf(t, format, render(t, d, format)))
			sayings(d, func(what, text string, number bool) {
				if format == "csv" && number {
					text = plainNumber(text)
				}
				if format == "text" && strings.HasPrefix(what, "section") {
					text = strings.ToUpper(text)
				}
				if !strings.Contains(shown, squeeze(text)) {
					t.Errorf("%s in %s lacks the %s %q", units, format, what, text)
				}
			})
		}
	}
}

// sayings gives every text of the document.
func sayings(d *Document, say func(what, text string, number bool)) {
	say("title", d.Title, false)
	say("subtitle", d.Subtitle, false)
	for _, s := range d.Sections {
		say("section", s.Title, false)
		say("lead", s.Lead, false)
		for _, block := range s.Blocks {
			switch v := block.(type) {
			case Paragraph:
				say("paragraph", v.Text, false)
			case List:
				for _, i := range v.Items {
					say("item", i, false)
				}
			case Figure:
				say("caption of plot", v.Caption, false)
			case Picture:
				say("caption of photograph", v.Caption, false)
			case Table:
				say("caption", v.Caption, false)
				say("note", v.Says, false)
				for _, c := range v.Columns {
					say("head", columnLabel(c), false)
				}
				for _, row := range v.Rows {
					for j, cell := range row {
						say("cell", cell, !v.Columns[j].Text)
					}
				}
			}
		}
	}
}

// Every table and figure says what it shows, and every row fits its head.
func TestEveryPartSaysWhatItShows(t *testing.T) {
	d := Build(demoResult(t), demoOptions(t))
	for _, s := range d.Sections {
		for _, block := range s.Blocks {
			switch v := block.(type) {
			case Table:
				if s.ID != "answers" && v.Caption == "" {
					t.Errorf("a table in %s has no caption", s.ID)
				}
				for _, row := range v.Rows {
					if len(row) != len(v.Columns) {
						t.Errorf("table %q: a row of %d cells under %d columns", v.Caption, len(row), len(v.Columns))
					}
				}
			case Figure:
				if len(v.Caption) < 40 || len(v.Alt) < 30 {
					t.Errorf("figure %s does not say what it shows: %q, %q", v.ID, v.Caption, v.Alt)
				}
			}
		}
	}
}

var metric = regexp.MustCompile(`\b(mm|MPa|µm|°C|N|N·m2|kN)\b`)

// In US units nothing but what was typed in (the job card, marks, amendments)
// and the clauses' own words is in SI.
func TestUnitsAreNotMixed(t *testing.T) {
	o := demoOptions(t)
	o.Units = "us"
	d := Build(demoResult(t), o)
	found := 0
	for _, s := range d.Sections {
		if s.ID == "job" || s.ID == "entries" || s.ID == "evaluations" {
			continue
		}
		one := &Document{Sections: []Section{s}}
		sayings(one, func(what, text string, _ bool) {
			found++
			// Warnings are in the analysis's own words.
			if what != "item" && metric.MatchString(text) {
				t.Errorf("the %s %q of %s is in SI units", what, text, s.ID)
			}
		})
	}
	if found < 100 {
		t.Errorf("only %d texts were looked at", found)
	}
}

// The same run gives the same bytes in every format.
func TestSameBytesInEveryFormat(t *testing.T) {
	for _, format := range Formats {
		first := render(t, Build(demoResult(t), demoOptions(t)), format)
		if again := render(t, Build(demoResult(t), demoOptions(t)), format); !bytes.Equal(first, again) {
			t.Errorf("the same result gave other bytes as %s", format)
		}
	}
}
