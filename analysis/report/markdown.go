package report

import (
	"fmt"
	"io"
	"strings"
)

// Markdown writes the document in the CommonMark dialect with pipe tables.
// Plots and photographs stand by their captions and descriptions; the drawings
// themselves are in the HTML and PDF reports.
func Markdown(w io.Writer, d *Document) error {
	var b strings.Builder
	fmt.Fprintf(&b, "# %s\n\n%s\n", marked(d.Title), marked(d.Subtitle))
	for i, s := range d.Sections {
		fmt.Fprintf(&b, "\n## %d %s\n", i+1, marked(s.Title))
		if s.Lead != "" {
			fmt.Fprintf(&b, "\n%s\n", marked(s.Lead))
		}
		for _, block := range s.Blocks {
			markBlock(&b, block)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func markBlock(b *strings.Builder, block Block) {
	switch v := block.(type) {
	case Paragraph:
		fmt.Fprintf(b, "\n%s\n", marked(v.Text))
	case List:
		b.WriteByte('\n')
		for _, item := range v.Items {
			if v.Grave {
				item = "**" + marked(item) + "**"
			} else {
				item = marked(item)
			}
			fmt.Fprintf(b, "- %s\n", item)
		}
	case Table:
		markTable(b, v)
	case Figure:
		fmt.Fprintf(b, "\n*Plot: %s* %s\n", marked(v.Caption), marked(v.Alt))
	case Picture:
		fmt.Fprintf(b, "\n*Photograph: %s* %s\n", marked(v.Caption), marked(v.Alt))
	}
}

func markTable(b *strings.Builder, t Table) {
	if t.Caption != "" {
		fmt.Fprintf(b, "\n**%s**\n", marked(t.Caption))
	}
	b.WriteString("\n|")
	for _, c := range t.Columns {
		b.WriteString(" " + marked(columnLabel(c)) + " |")
	}
	b.WriteString("\n|")
	for _, c := range t.Columns {
		if c.Text {
			b.WriteString(" :-- |")
		} else {
			b.WriteString(" --: |")
		}
	}
	b.WriteByte('\n')
	for _, row := range t.Rows {
		b.WriteByte('|')
		for _, cell := range row {
			b.WriteString(" " + marked(cell) + " |")
		}
		b.WriteByte('\n')
	}
	if t.Says != "" {
		fmt.Fprintf(b, "\n%s\n", marked(t.Says))
	}
}

// markers are the characters that Markdown or HTML in it would take for its
// own; each is printed as itself.
var markers = strings.NewReplacer(
	`\`, `\\`, "`", "\\`", "*", `\*`, "_", `\_`, "[", `\[`, "]", `\]`, "<", "&lt;", ">", "&gt;", "&", "&amp;",
	"|", `\|`, "#", `\#`, "~", `\~`, "\n", " ", "\r", " ")

func marked(s string) string { return markers.Replace(s) }
