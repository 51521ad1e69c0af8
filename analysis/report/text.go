package report

import (
	"fmt"
	"io"
	"strings"
	"text/tabwriter"
)

// Text writes the document for a terminal: the same sections and tables, with
// plots and photographs by their captions.
func Text(w io.Writer, d *Document) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s\n%s\n", d.Title, d.Subtitle)
	for i, s := range d.Sections {
		fmt.Fprintf(&b, "\n%d  %s\n", i+1, strings.ToUpper(s.Title))
		if s.Lead != "" {
			fmt.Fprintf(&b, "%s\n", s.Lead)
		}
		for _, block := range s.Blocks {
			textBlock(&b, block)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func textBlock(b *strings.Builder, block Block) {
	switch v := block.(type) {
	case Paragraph:
		fmt.Fprintf(b, "\n%s\n", v.Text)
	case List:
		b.WriteByte('\n')
		for _, item := range v.Items {
			fmt.Fprintf(b, "  - %s\n", item)
		}
	case Table:
		textTable(b, v)
	case Figure:
		fmt.Fprintf(b, "\n  [plot] %s\n", v.Caption)
	case Picture:
		fmt.Fprintf(b, "\n  [photograph] %s\n", v.Caption)
	}
}

func textTable(b *strings.Builder, t Table) {
	b.WriteByte('\n')
	if t.Caption != "" {
		fmt.Fprintf(b, "%s\n", t.Caption)
	}
	tw := tabwriter.NewWriter(b, 0, 8, 2, ' ', 0)
	var head []string
	for _, c := range t.Columns {
		head = append(head, columnLabel(c))
	}
	fmt.Fprintf(tw, "  %s\n", strings.Join(head, "\t"))
	for _, row := range t.Rows {
		fmt.Fprintf(tw, "  %s\n", strings.Join(row, "\t"))
	}
	tw.Flush()
	if t.Says != "" {
		fmt.Fprintf(b, "  %s\n", t.Says)
	}
}
