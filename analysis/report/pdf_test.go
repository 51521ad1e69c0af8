package report

import (
	"bytes"
	"regexp"
	"strings"
	"testing"
	"unicode/utf16"

	"pgregory.net/rapid"
)

var drawnText = regexp.MustCompile(`(?s)\(((?:\\.|[^\\)])*)\) Tj`)

// pdfText reads the texts of an uncompressed PDF of this writer: its fonts are
// addressed by UTF-16 (Identity-H with the code point as character id).
func pdfText(t *testing.T, b []byte) string {
	t.Helper()
	var out strings.Builder
	for _, m := range drawnText.FindAllSubmatch(b, -1) {
		var raw []byte
		for i := 0; i < len(m[1]); i++ {
			c := m[1][i]
			if c == '\\' {
				i++
				c = m[1][i]
				if c == 'r' {
					c = '\r'
				}
			}
			raw = append(raw, c)
		}
		if len(raw)%2 != 0 {
			t.Fatalf("a text of odd length: %q", raw)
		}
		var u []uint16
		for i := 0; i < len(raw); i += 2 {
			u = append(u, uint16(raw[i])<<8|uint16(raw[i+1]))
		}
		out.WriteString(string(utf16.Decode(u)) + "\n")
	}
	return out.String()
}

func TestPDFBytesAreStable(t *testing.T) {
	for _, paper := range []string{"a4", "letter"} {
		var first []byte
		for range 3 {
			var b bytes.Buffer
			if err := PDF(&b, Build(demoResult(t), demoOptions(t)), paper); err != nil {
				t.Fatal(err)
			}
			if first == nil {
				first = b.Bytes()
			} else if !bytes.Equal(first, b.Bytes()) {
				t.Errorf("the same document gave another %s file", paper)
			}
		}
		// A4 is 210 x 297 mm (ISO 216), Letter 8.5 x 11 in; in points.
		box := map[string]string{"a4": "/MediaBox [0 0 595.28 841.89]", "letter": "/MediaBox [0 0 612.00 792.00]"}[paper]
		if !bytes.Contains(first, []byte(box)) {
			t.Errorf("no %s in the %s file", box, paper)
		}
		for _, want := range []string{"/Lang (en)", "/CreationDate (D:20260310091700)", "/Outlines"} {
			if !bytes.Contains(first, []byte(want)) {
				t.Errorf("no %s in the %s file", want, paper)
			}
		}
	}
	if err := PDF(&bytes.Buffer{}, &Document{}, "a3"); err == nil {
		t.Error("a paper that is not known was taken")
	}
}

// A table over several pages shows its head on each, and says how many pages
// there are.
func TestPDFRepeatsHeads(t *testing.T) {
	compress = false
	defer func() { compress = true }()
	table := Table{Caption: "Long", Columns: []Column{{Name: "Headword", Text: true}, {Name: "Number"}}, Says: "Its note."}
	for range 200 {
		table.Rows = append(table.Rows, []string{"row", "1"})
	}
	table.Rows = append(table.Rows, []string{strings.Repeat("a cell higher than a page ", 900), "2"})
	d := &Document{Title: "Pages", Sections: []Section{{ID: "x", Title: "One", Blocks: []Block{table}}}}
	text := pdfText(t, render(t, d, "pdf"))
	pages := len(regexp.MustCompile(`page \d+ of \d+`).FindAllString(text, -1))
	if heads := strings.Count(text, "Headword"); pages < 8 || heads != pages {
		t.Errorf("%d heads on %d pages", heads, pages)
	}
	if strings.Count(text, "Long (continued)") != pages-1 {
		t.Errorf("the pages do not say that the table goes on")
	}
	if n := strings.Count(text, "row\n"); n != 200 {
		t.Errorf("%d rows, want 200", n)
	}
	if n := strings.Count(squeeze(text), squeeze("a cell higher than a page")); n < 880 {
		t.Errorf("the tall cell shows %d of its 900 parts", n)
	}
}

// Whatever a table holds, its columns have room and stay on the page.
func TestShareWidth(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 12).Draw(t, "columns")
		least, most := make([]float64, n), make([]float64, n)
		for j := range n {
			least[j] = rapid.Float64Range(1, 80).Draw(t, "least")
			most[j] = least[j] + rapid.Float64Range(0, 300).Draw(t, "more")
		}
		room := 174 - columnGap*float64(n-1)
		out := shareWidth(least, most, room)
		if sum := total64(out); sum > room+1e-3 {
			t.Fatalf("%v are %.3f mm wide, room is %.3f", out, sum, room)
		}
		for j, w := range out {
			if w <= 0 || total64(least) <= room && w < least[j]-1e-6 {
				t.Fatalf("column %d got %.3f mm and needs %.3f", j, w, least[j])
			}
		}
	})
}
