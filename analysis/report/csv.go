package report

import (
	"encoding/csv"
	"fmt"
	"io"
	"strings"
)

// CSV writes the document's tables one block each, by RFC 4180 with every
// record of the same length. The first field says what a record is (title,
// section, text, table, head, row, note, plot, photograph), the second counts
// sections and the third the tables in each; the cells follow. Numbers are
// plain: a point, a hyphen for minus, no spaces between thousands, and empty
// where there is none.
func CSV(w io.Writer, d *Document) error {
	var all [][]string
	put := func(kind string, section, table int, cells ...string) {
		all = append(all, append([]string{kind, counted(section), counted(table)}, cells...))
	}
	put("title", 0, 0, safe(d.Title), safe(d.Subtitle))
	for i, s := range d.Sections {
		put("section", i+1, 0, safe(s.Title), safe(s.Lead))
		tables := 0
		for _, block := range s.Blocks {
			switch v := block.(type) {
			case Paragraph:
				put("text", i+1, 0, safe(v.Text))
			case List:
				for _, item := range v.Items {
					put("text", i+1, 0, safe(item))
				}
			case Figure:
				put("plot", i+1, 0, safe(v.Caption), safe(v.Alt))
			case Picture:
				put("photograph", i+1, 0, safe(v.Caption), safe(v.Alt))
			case Table:
				tables++
				put("table", i+1, tables, safe(v.Caption))
				put("head", i+1, tables, labels(v.Columns)...)
				for _, row := range v.Rows {
					put("row", i+1, tables, csvRow(v.Columns, row)...)
				}
				if v.Says != "" {
					put("note", i+1, tables, safe(v.Says))
				}
			}
		}
	}
	return writeEven(w, all)
}

func counted(n int) string {
	if n == 0 {
		return ""
	}
	return fmt.Sprint(n)
}

func labels(columns []Column) []string {
	var out []string
	for _, c := range columns {
		out = append(out, safe(columnLabel(c)))
	}
	return out
}

func csvRow(columns []Column, row []string) []string {
	out := make([]string, len(row))
	for i, cell := range row {
		if columns[i].Text {
			out[i] = safe(cell)
		} else {
			out[i] = plainNumber(cell)
		}
	}
	return out
}

// plainNumber is a number as programs read it.
func plainNumber(cell string) string {
	if cell == "–" {
		return ""
	}
	return strings.NewReplacer("−", "-", thousands, "").Replace(cell)
}

// safe keeps a text from being taken for a formula by a spreadsheet.
func safe(s string) string {
	if s != "" && strings.ContainsRune("=+-@\t\r", rune(s[0])) {
		return "'" + s
	}
	return s
}

// writeEven pads the records to one length and writes them.
func writeEven(w io.Writer, all [][]string) error {
	n := 0
	for _, r := range all {
		n = max(n, len(r))
	}
	out := csv.NewWriter(w)
	out.UseCRLF = true
	for _, r := range all {
		for len(r) < n {
			r = append(r, "")
		}
		if err := out.Write(r); err != nil {
			return err
		}
	}
	out.Flush()
	return out.Error()
}
