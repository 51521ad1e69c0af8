package report

import (
	"bytes"
	"fmt"
	"io"
	"strings"
	"sync"
	"time"

	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"codeberg.org/go-pdf/fpdf"
	"golang.org/x/image/font/sfnt"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

const pdfFont = "sans"

// Papers are the sizes PDF takes.
var Papers = []string{"a4", "letter"}

// PDF writes the document for print, with the plots as vectors and the fonts
// embedded. Paper is a4 (or "") or letter. The same document gives the same
// bytes: its dates are those of the last reading.
func PDF(w io.Writer, d *Document, paper string) error {
	size := map[string]string{"": "A4", "a4": "A4", "letter": "Letter"}[strings.ToLower(paper)]
	if size == "" {
		return fmt.Errorf("paper %q is not known: a4 or letter", paper)
	}
	// The number of pages stands on every page: it is known after a first pass.
	first := newSheet(d, size, 0)
	first.document(d)
	s := newSheet(d, size, first.f.PageNo())
	s.document(d)
	var buf bytes.Buffer
	if err := s.f.Output(&buf); err != nil {
		return fmt.Errorf("report as PDF: %w", err)
	}
	_, err := w.Write(buf.Bytes())
	return err
}

// Lengths on paper, mm; sizes of type, points.
const (
	sideMargin, topMargin, bottomMargin = 18.0, 17.0, 20.0
	bodySize, smallSize, tableSize      = 9.5, 8.3, 8.3
	leading                             = 1.36 // line height over size
)

// sheet is the document in the making: y is where the next block begins.
type sheet struct {
	f            *fpdf.Fpdf
	width, floor float64 // of the text; y of its end
	y            float64
	alt          func(string) string
}

// compress may be turned off by tests that read the pages back.
var compress = true

func newSheet(d *Document, size string, pages int) *sheet {
	f := fpdf.New("P", "mm", size, "")
	f.SetCompression(compress)
	f.AddUTF8FontFromBytes(pdfFont, "", liberationsansregular.TTF)
	f.AddUTF8FontFromBytes(pdfFont, "B", liberationsansbold.TTF)
	f.SetAutoPageBreak(false, 0)
	f.SetCatalogSort(true)
	at := d.Last
	if at.IsZero() {
		at = time.Unix(0, 0)
	}
	f.SetCreationDate(at.UTC())
	f.SetModificationDate(at.UTC())
	f.SetLang("en")
	f.SetTitle(printable(d.Title), true)
	f.SetSubject(printable(d.Subtitle), true)
	f.SetProducer("gaugelog", true)
	f.SetCreator("gaugelog", true)
	w, h := f.GetPageSize()
	s := &sheet{f: f, width: w - 2*sideMargin, floor: h - bottomMargin, alt: printable}
	f.SetFooterFunc(func() { s.footer(d, h, pages) })
	s.newPage()
	return s
}

func (s *sheet) newPage() {
	s.f.AddPage()
	s.y = topMargin
}

func (s *sheet) footer(d *Document, h float64, pages int) {
	s.f.SetDrawColor(0x99, 0x99, 0x99)
	s.f.SetLineWidth(0.2)
	s.f.SetDashPattern(nil, 0)
	s.f.Line(sideMargin, h-14, sideMargin+s.width, h-14)
	no := fmt.Sprintf("page %d of %d", s.f.PageNo(), pages)
	s.style("", 7.5, soft)
	right := s.f.GetStringWidth(no)
	title := s.clip(printable(d.Title), s.width-right-8)
	s.f.Text(sideMargin, h-10, title)
	s.f.Text(sideMargin+s.width-right, h-10, no)
}

// clip shortens a running title that has no room.
func (s *sheet) clip(text string, w float64) string {
	if s.f.GetStringWidth(text) <= w {
		return text
	}
	r := []rune(text)
	for len(r) > 0 && s.f.GetStringWidth(string(r)+"…") > w {
		r = r[:len(r)-1]
	}
	return strings.TrimSpace(string(r)) + "…"
}

type grey [3]int

var (
	dark = grey{0x1a, 0x1f, 0x26}
	soft = grey{0x4a, 0x52, 0x5c}
	rule = grey{0xc4, 0xca, 0xd1}
)

func (s *sheet) style(weight string, size float64, c grey) {
	s.f.SetFont(pdfFont, weight, size)
	s.f.SetTextColor(c[0], c[1], c[2])
}

// lineHeight is the height of a line of type, mm.
func lineHeight(size float64) float64 { return size * leading * mmPerPoint }

// ensure begins a new page where h mm do not fit on this one.
func (s *sheet) ensure(h float64) {
	if s.y+h > s.floor && s.y > topMargin {
		s.newPage()
	}
}

// lines writes finished lines at x, each on its own baseline.
func (s *sheet) lines(x float64, lines []string, size float64) {
	for _, l := range lines {
		s.f.Text(x, s.y+size*mmPerPoint*1.02, l)
		s.y += lineHeight(size)
	}
}

// text writes a wrapped text, over pages where it must.
func (s *sheet) text(text, weight string, size float64, c grey) {
	s.style(weight, size, c)
	for _, l := range s.wrap(text, s.width) {
		s.ensure(lineHeight(size))
		s.style(weight, size, c)
		s.lines(sideMargin, []string{l}, size)
	}
}

func (s *sheet) document(d *Document) {
	s.text(d.Title, "B", 17, dark)
	s.y += 0.6
	s.text(d.Subtitle, "", bodySize, soft)
	s.y += 1.6
	s.line(dark, 0.7, sideMargin, sideMargin+s.width)
	for i, sec := range d.Sections {
		s.section(i+1, sec)
	}
	s.f.Close()
}

func (s *sheet) line(c grey, w, from, to float64) {
	s.f.SetDrawColor(c[0], c[1], c[2])
	s.f.SetLineWidth(w)
	s.f.Line(from, s.y, to, s.y)
}

func (s *sheet) section(no int, sec Section) {
	head := 6 + lineHeight(12.5) + 2
	if sec.Lead != "" {
		s.style("", bodySize, soft)
		head += float64(len(s.wrap(sec.Lead, s.width)))*lineHeight(bodySize) + 1
	}
	if len(sec.Blocks) > 0 {
		head += s.least(sec.Blocks[0]) + 2
	}
	s.ensure(min(head, s.floor-topMargin))
	if s.y > topMargin {
		s.y += 6
	}
	title := fmt.Sprintf("%d  %s", no, sec.Title)
	s.f.Bookmark(s.alt(title), 0, s.y)
	s.text(title, "B", 12.5, dark)
	s.y += 0.8
	s.line(rule, 0.25, sideMargin, sideMargin+s.width)
	s.y += 1.4
	if sec.Lead != "" {
		s.text(sec.Lead, "", bodySize, soft)
		s.y += 0.6
	}
	for i, b := range sec.Blocks {
		s.block(b, sec.ID == "answers" && i == 0)
	}
}

// least is the height that must follow a heading on its page.
func (s *sheet) least(b Block) float64 {
	switch v := b.(type) {
	case Figure:
		return leastHeight(v.Height) + 14
	case Picture:
		_, h := pictureSize(v)
		return leastHeight(h) + 14
	case Table:
		return s.leastOf(s.layTable(v, false))
	}
	if l, ok := b.(List); ok && l.Grave {
		return s.listHeight(l)
	}
	return 3 * lineHeight(bodySize)
}

// listHeight is that of a whole grave list, which is never cut.
func (s *sheet) listHeight(l List) float64 {
	h := 2.0
	s.style("B", bodySize, dark)
	for _, item := range l.Items {
		h += float64(len(s.wrap(item, s.width-6)))*lineHeight(bodySize) + 0.8
	}
	return min(h, s.floor-topMargin)
}

func (s *sheet) block(b Block, answers bool) {
	switch v := b.(type) {
	case Paragraph:
		s.y += 1.2
		s.ensure(2 * lineHeight(bodySize))
		s.text(v.Text, "", bodySize, dark)
		s.y += 1
	case List:
		s.list(v)
	case Table:
		s.table(s.layTable(v, answers))
	case Figure:
		s.figure(v)
	case Picture:
		s.picture(v)
	}
}

// list writes items; a grave one has a bar down its side.
func (s *sheet) list(l List) {
	s.y += 1.2
	if l.Grave {
		s.ensure(s.listHeight(l))
	}
	for _, item := range l.Items {
		weight := ""
		if l.Grave {
			weight = "B"
		}
		s.style(weight, bodySize, dark)
		lines := s.wrap(item, s.width-6)
		h := float64(len(lines)) * lineHeight(bodySize)
		s.ensure(min(h+0.8, s.floor-topMargin))
		s.style(weight, bodySize, dark)
		if l.Grave {
			s.f.SetFillColor(dark[0], dark[1], dark[2])
			s.f.Rect(sideMargin, s.y-0.2, 1.1, h+0.8, "F")
		} else {
			s.f.SetFillColor(dark[0], dark[1], dark[2])
			s.f.Circle(sideMargin+2, s.y+lineHeight(bodySize)*0.45, 0.5, "F")
		}
		for _, line := range lines {
			s.ensure(lineHeight(bodySize))
			s.lines(sideMargin+5, []string{line}, bodySize)
		}
		s.y += 0.8
	}
	s.y += 0.8
}

// leastHeight is how low a plot or photograph may be drawn, mm, so that it stays
// on a page that has not quite the room for it and leaves no gap there.
func leastHeight(h float64) float64 { return max(0.55*h, min(h, 36)) }

// room is the height for a plot or photograph of height h and its caption: what
// is left on this page where that is enough, else h on the next one.
func (s *sheet) room(h float64, caption []string) float64 {
	below := 1 + float64(len(caption))*lineHeight(smallSize)
	if left := s.floor - s.y - below; left >= leastHeight(h) {
		return min(h, left)
	}
	s.ensure(h + below)
	return h
}

func (s *sheet) figure(g Figure) {
	w := min(g.Width, s.width)
	s.style("", smallSize, soft)
	caption := s.wrap(g.Caption, s.width)
	s.y += 2
	g.Height = s.room(g.Height, caption)
	c := newPDFCanvas(s.f, s.alt, sideMargin, s.y, g.Height)
	drawFigure(g, draw.NewCanvas(c, vg.Length(w)*vg.Millimeter, vg.Length(g.Height)*vg.Millimeter))
	s.y += g.Height + 1
	s.style("", smallSize, soft)
	s.lines(sideMargin, caption, smallSize)
	s.y += 2
}

// pictureSize is a photograph's on paper: at most 150 mm wide and 110 mm high.
func pictureSize(p Picture) (w, h float64) {
	w, h = 150.0, 150*float64(p.Height)/float64(p.Width)
	if h > 110 {
		w, h = w*110/h, 110
	}
	return w, h
}

func (s *sheet) picture(p Picture) {
	w, h := pictureSize(p)
	s.style("", smallSize, soft)
	caption := s.wrap(p.Caption, s.width)
	s.y += 2
	if lower := s.room(h, caption); lower < h {
		w, h = w*lower/h, lower
	}
	o := fpdf.ImageOptions{ImageType: strings.TrimPrefix(p.Type, "image/")}
	name := fmt.Sprintf("photo-%d-%d", s.f.PageNo(), int(s.y*100))
	data := p.Data
	if o.ImageType == "png" {
		plain, err := plainPNG(data)
		if err != nil {
			panic(fmt.Sprintf("report: a picture that was read before cannot be read: %v", err))
		}
		data = plain
	}
	s.f.RegisterImageOptionsReader(name, o, bytes.NewReader(data))
	s.f.ImageOptions(name, sideMargin, s.y, w, h, false, o, 0, "")
	s.y += h + 1
	s.style("", smallSize, soft)
	s.lines(sideMargin, caption, smallSize)
	s.y += 2
}

var glyphs = sync.OnceValue(func() *sfnt.Font {
	f, err := sfnt.Parse(liberationsansregular.TTF)
	if err != nil {
		panic(fmt.Sprintf("report: the embedded font cannot be read: %v", err))
	}
	return f
})

// printable puts a hollow box for what the embedded font cannot show.
func printable(s string) string {
	var buf sfnt.Buffer
	return strings.Map(func(r rune) rune {
		if r < 0x7f {
			return r
		}
		if i, err := glyphs().GlyphIndex(&buf, r); err != nil || i == 0 || r > 0xffff {
			return '□'
		}
		return r
	}, s)
}
