package report

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// tool finds a program of Debian's, or skips the test where it is not installed.
func tool(t *testing.T, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatalf("%s is not installed, and the continuous integration must have it", name)
		}
		t.Skipf("%s is not installed", name)
	}
	return path
}

// poppler runs a program of poppler-utils.
func poppler(t *testing.T, name string, args ...string) string {
	t.Helper()
	out, err := exec.Command(tool(t, name), args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s: %v: %s", name, err, out)
	}
	return string(out)
}

// Debian's tidy finds no fault in the page.
func TestPageByTidy(t *testing.T) {
	path := tool(t, "tidy")
	for _, units := range []string{"si", "us"} {
		o := demoOptions(t)
		o.Units = units
		cmd := exec.Command(path, "-q", "-e", "-utf8")
		cmd.Stdin = bytes.NewReader(render(t, Build(demoResult(t), o), "html"))
		if said, _ := cmd.CombinedOutput(); len(said) > 0 { // it exits with 1 for warnings
			t.Errorf("%s: %s", units, said)
		}
	}
}

// What another program reads out of the file: title, who made it, whether it is
// tagged (it is not, and the help says so), every font embedded, and the text in
// the order in which it is to be read: sections one after another, and in a table
// row by row, cell by cell.
func TestPDFByPoppler(t *testing.T) {
	d := Build(demoResult(t), demoOptions(t))
	for _, paper := range Papers {
		file := filepath.Join(t.TempDir(), paper+".pdf")
		f, err := os.Create(file)
		if err != nil {
			t.Fatal(err)
		}
		if err := PDF(f, d, paper); err != nil {
			t.Fatal(err)
		}
		f.Close()
		info := poppler(t, "pdfinfo", file)
		for _, want := range []string{d.Title, d.Subtitle, "gaugelog", "Tagged:          no"} {
			if !strings.Contains(info, want) {
				t.Errorf("%s: the file's particulars lack %q:\n%s", paper, want, info)
			}
		}
		fonts := strings.Split(strings.TrimSpace(poppler(t, "pdffonts", file)), "\n")
		for _, line := range fonts[2:] {
			if !strings.Contains(line, " yes ") {
				t.Errorf("%s: a font is not embedded: %s", paper, line)
			}
		}
		text := squeeze(poppler(t, "pdftotext", "-raw", file, "-"))
		at := 0
		next := func(what, part string) {
			part = squeeze(part)
			i := strings.Index(text[at:], part)
			if i < 0 {
				t.Errorf("%s: the %s %q does not follow in the order of reading", paper, what, part)
				return
			}
			at += i + len(part)
		}
		for _, s := range d.Sections {
			next("section", s.Title)
			for _, block := range s.Blocks {
				switch v := block.(type) {
				case Table:
					if v.Caption != "" {
						next("caption", v.Caption)
					}
					for _, row := range v.Rows {
						for _, cell := range row {
							if !strings.Contains(cell, " ") { // others may be broken over lines and pages
								next("cell", cell)
							}
						}
					}
				case Figure:
					next("caption", strings.Split(v.Caption, " ")[0])
				}
			}
		}
	}
}

// A table of contents stands beside the pages: a bookmark a section.
func TestPDFHasABookmarkASection(t *testing.T) {
	compress = false
	defer func() { compress = true }()
	d := Build(demoResult(t), demoOptions(t))
	b := string(render(t, d, "pdf"))
	if n := strings.Count(b, "/Dest ["); n != len(d.Sections) {
		t.Errorf("%d bookmarks for %d sections", n, len(d.Sections))
	}
}

// A plot that has not quite the room on its page is drawn lower and stays there;
// where it would become too low it goes to the next page, at its full height.
func TestPlotsLeaveNoGaps(t *testing.T) {
	d := &Document{Title: "Room"}
	for _, paper := range []string{"A4", "Letter"} {
		for left := 5.0; left < 200; left += 3 {
			s := newSheet(d, paper, 1)
			s.y = s.floor - left
			caption := []string{"one line"}
			h := s.room(80, caption)
			below := 1 + lineHeight(smallSize)
			switch {
			case s.f.PageNo() == 1 && (h < leastHeight(80) || s.y+h+below > s.floor+1e-9):
				t.Errorf("%s: with %g mm left a plot is %g mm high", paper, left, h)
			case s.f.PageNo() == 1 && left-below >= 80 && h != 80:
				t.Errorf("%s: with %g mm left a plot of 80 mm is drawn %g mm high", paper, left, h)
			case s.f.PageNo() == 2 && (left-below >= leastHeight(80) || h != 80):
				t.Errorf("%s: with %g mm left a plot goes to the next page, %g mm high", paper, left, h)
			}
		}
	}
}

// Lines are told apart without colour: no two of the first eight have the same
// dashes.
func TestLinesDifferInTheirDashes(t *testing.T) {
	seen := map[string]int{}
	for i := range len(shades) {
		k := ""
		for _, l := range lineStyle(i).Dashes {
			k += fmt.Sprint(l, " ")
		}
		if j, twice := seen[k]; twice {
			t.Errorf("lines %d and %d have the same dashes", j, i)
		}
		seen[k] = i
	}
}
