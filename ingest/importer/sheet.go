package importer

import (
	"bufio"
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"strings"
	"unicode/utf8"

	"gaugelog/config"
)

// rows reads a CSV row by row.
type rows struct {
	csv    *csv.Reader
	file   string
	header []string
	// comma says that a decimal comma is meant.
	comma bool
}

// openRows reads the header and finds out what separates the columns: the one
// of comma, semicolon and tab that stands in it most often.
func openRows(file string, r io.Reader, m *Mapping) (*rows, error) {
	b := bufio.NewReaderSize(r, 1<<16)
	start, err := b.Peek(1 << 14)
	if err != nil && err != io.EOF && !errors.Is(err, bufio.ErrBufferFull) {
		return nil, err
	}
	if bytes.HasPrefix(start, []byte{0xff, 0xfe}) || bytes.HasPrefix(start, []byte{0xfe, 0xff}) || bytes.IndexByte(start, 0) >= 0 {
		return nil, config.Problem{File: file, What: "this is no UTF-8 text", Fix: "save it as CSV in UTF-8"}
	}
	if bytes.HasPrefix(start, []byte("\xef\xbb\xbf")) {
		start = start[3:]
		if _, err := b.Discard(3); err != nil {
			return nil, err
		}
	}
	line, _, _ := bytes.Cut(start, []byte("\n"))
	separator, most := ',', bytes.Count(line, []byte(","))
	for _, s := range ";\t" {
		if n := bytes.Count(line, []byte(string(s))); n > most {
			separator, most = s, n
		}
	}
	c := csv.NewReader(b)
	c.Comma, c.FieldsPerRecord, c.ReuseRecord = separator, -1, true
	header, err := c.Read()
	if err == io.EOF {
		return nil, config.Problem{File: file, What: "there is no header", Fix: "the first row names the columns"}
	}
	if err != nil {
		return nil, badRow(file, err)
	}
	t := &rows{csv: c, file: file, header: append([]string(nil), header...), comma: m.Decimal == "comma" || m.Decimal == "" && separator != ','}
	for _, h := range header {
		if !utf8.ValidString(h) {
			return nil, config.Problem{File: file, Line: 1, What: "the header is no UTF-8 text", Fix: "save it as CSV in UTF-8"}
		}
	}
	return t, nil
}

// next returns the next row that is not blank, with its line in the file; the
// cells are valid until the next call.
func (t *rows) next() (cells []string, line int, err error) {
	for {
		cells, err = t.csv.Read()
		if err == io.EOF {
			return nil, 0, err
		}
		if err != nil {
			return nil, 0, badRow(t.file, err)
		}
		line, _ = t.csv.FieldPos(0)
		if strings.TrimSpace(strings.Join(cells, "")) == "" {
			continue
		}
		for _, extra := range cells[min(len(cells), len(t.header)):] {
			if strings.TrimSpace(extra) != "" {
				return nil, line, config.Problem{File: t.file, Line: line,
					What: fmt.Sprintf("the row has %d cells, the header %d", len(cells), len(t.header)),
					Fix:  "quote cells that hold the separator, or give a decimal comma another separator"}
			}
		}
		return cells, line, nil
	}
}

func badRow(file string, err error) error {
	var p *csv.ParseError
	if errors.As(err, &p) {
		return config.Problem{File: file, Line: p.Line, What: p.Err.Error(), Fix: "quote a cell whole, and double the quotes in it (RFC 4180)"}
	}
	return err
}

// cell is a row's cell, empty where the row is shorter or there is no column.
func cell(cells []string, i int) string {
	if i < 0 || i >= len(cells) {
		return ""
	}
	return strings.TrimSpace(cells[i])
}
