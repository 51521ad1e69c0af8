package report

import (
	"fmt"
	"io"
)

// Formats are the names Write takes: a page, a printable file, Markdown, a
// table file and plain text.
var Formats = []string{"html", "pdf", "md", "csv", "text"}

// Write renders the document in one of Formats. Paper is a4 (or "") or letter
// and counts for pdf only. It returns an error for a name it does not know,
// and where w does.
func Write(w io.Writer, d *Document, format, paper string) error {
	switch format {
	case "html":
		return HTML(w, d)
	case "pdf":
		return PDF(w, d, paper)
	case "md":
		return Markdown(w, d)
	case "csv":
		return CSV(w, d)
	case "text":
		return Text(w, d)
	}
	return fmt.Errorf("format %q is not known", format)
}
