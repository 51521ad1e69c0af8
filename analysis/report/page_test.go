package report

import (
	"fmt"
	"image/color"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

var variable = regexp.MustCompile(`--([a-z]+):\s*#([0-9a-f]{3,6})`)

// palette reads the colours set in one block of the style sheet.
func palette(t *testing.T, block string) map[string][3]float64 {
	t.Helper()
	out := map[string][3]float64{}
	for _, m := range variable.FindAllStringSubmatch(block, -1) {
		hex := m[2]
		if len(hex) == 3 {
			hex = fmt.Sprintf("%c%c%c%c%c%c", hex[0], hex[0], hex[1], hex[1], hex[2], hex[2])
		}
		v, err := strconv.ParseUint(hex, 16, 32)
		if err != nil {
			t.Fatal(err)
		}
		out[m[1]] = [3]float64{float64(v >> 16), float64(v >> 8 & 0xff), float64(v & 0xff)}
	}
	return out
}

// luminance and contrast are those of WCAG 2.2 (W3C), relative luminance and
// contrast ratio.
func luminance(c [3]float64) float64 {
	weights, sum := [3]float64{0.2126, 0.7152, 0.0722}, 0.0
	for i, v := range c {
		v /= 255
		if v <= 0.04045 {
			v /= 12.92
		} else {
			v = math.Pow((v+0.055)/1.055, 2.4)
		}
		sum += weights[i] * v
	}
	return sum
}

func contrast(a, b [3]float64) float64 {
	x, y := luminance(a), luminance(b)
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

// Text has a contrast of at least 4.5 to what it stands on (WCAG 2.2, 1.4.3,
// level AA) in light, in dark and in print; bars have 3 (1.4.11).
func TestContrast(t *testing.T) {
	if c := contrast([3]float64{0, 0, 0}, [3]float64{255, 255, 255}); math.Abs(c-21) > 1e-9 {
		t.Fatalf("black on white is %v, WCAG says 21", c)
	}
	blocks := map[string]string{"light": style[:strings.Index(style, "@media")]}
	_, after, _ := strings.Cut(style, "prefers-color-scheme: dark")
	blocks["dark"], _, _ = strings.Cut(after, "@media")
	_, blocks["print"], _ = strings.Cut(style, "@media print")
	for name, block := range blocks {
		p := palette(t, block)
		for _, c := range []struct {
			over, under string
			least       float64
		}{{"ink", "paper", 4.5}, {"soft", "paper", 4.5}, {"ink", "tint", 4.5}, {"soft", "tint", 4.5}, {"bar", "paper", 3}} {
			over, has := p[c.over]
			under, too := p[c.under]
			if !has || !too {
				t.Errorf("%s does not set %s and %s", name, c.over, c.under)
				continue
			}
			if got := contrast(over, under); got < c.least {
				t.Errorf("%s: %s on %s has a contrast of %.2f, want %.1f", name, c.over, c.under, got, c.least)
			}
		}
	}
	white := [3]float64{255, 255, 255}
	for i, s := range shades {
		if got := contrast([3]float64{float64(s.R), float64(s.G), float64(s.B)}, white); got < 4.5 {
			t.Errorf("plot shade %d has a contrast of %.2f to its paper", i, got)
		}
	}
}

// The page is marked up for those who hear it or use only keys.
func TestPageMarkup(t *testing.T) {
	d := Build(demoResult(t), demoOptions(t))
	page := string(render(t, d, "html"))
	for what, pair := range map[string][2]string{
		"a table without head cells of scope":  {"<table>", `<thead><tr><th scope="col"`},
		"a plot without a role and a name":     {"<svg ", `role="img" aria-label="`},
		"a wide table that keys cannot scroll": {"<table>", `tabindex="0" role="group" aria-label="`},
		"a section without a name":             {"<section ", "aria-labelledby="},
	} {
		if a, b := strings.Count(page, pair[0]), strings.Count(page, pair[1]); a != b {
			t.Errorf("%s: %d against %d", what, a, b)
		}
	}
	for _, want := range []string{`<html lang="en">`, "default-src 'none'", "@page", `<img src="data:image/png;base64,`, `alt="Photograph: frame from the door side"`, "table-header-group"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page lacks %s", want)
		}
	}
	if rows, cells := strings.Count(page, "<tbody>"), strings.Count(page, `<th scope="row"`); cells < rows {
		t.Errorf("%d row heads in %d tables", cells, rows)
	}
	if m := regexp.MustCompile(`(?i)(src|href)="?(http|//|/)|<script|javascript:`).FindString(page); m != "" {
		t.Errorf("the page fetches or runs %q", m)
	}
}

// inverted is a colour as the style sheet's filter shows it in the dark: invert(a)
// and then hue-rotate(180deg), by the formulas of Filter Effects 1 (W3C), sections
// 9.6 and 9.5, with the cosine -1 and the sine 0.
func inverted(c [3]float64, a float64) (out [3]float64) {
	matrix := [3][3]float64{{-0.574, 1.43, 0.144}, {0.426, 0.43, 0.144}, {0.426, 1.43, -0.856}}
	for i := range c {
		for j := range c {
			v := c[j] / 255
			out[i] += matrix[i][j] * (v*(1-a) + (1-v)*a)
		}
		out[i] = 255 * min(max(out[i], 0), 1)
	}
	return out
}

// In the dark the plots are turned over: their letters have a contrast of 4.5 to
// what they stand on then, and their lines 3.
func TestContrastOfPlotsInTheDark(t *testing.T) {
	m := regexp.MustCompile(`\.plot svg \{ filter: invert\(([.0-9]+)\) hue-rotate\(180deg\); \}`).FindStringSubmatch(style)
	if m == nil {
		t.Fatal("the style sheet does not turn the plots over")
	}
	a, err := strconv.ParseFloat(m[1], 64)
	if err != nil {
		t.Fatal(err)
	}
	paper := inverted([3]float64{255, 255, 255}, a)
	rgb := func(c color.NRGBA) [3]float64 { return [3]float64{float64(c.R), float64(c.G), float64(c.B)} }
	if got := contrast(inverted(rgb(ink), a), paper); got < 4.5 {
		t.Errorf("letters have a contrast of %.2f", got)
	}
	for i, s := range shades {
		if got := contrast(inverted(rgb(s), a), paper); got < 3 {
			t.Errorf("shade %d has a contrast of %.2f", i, got)
		}
	}
	if _, print, _ := strings.Cut(style, "@media print"); !strings.Contains(print, "filter: none") {
		t.Error("print in the dark would turn them over too")
	}
}
