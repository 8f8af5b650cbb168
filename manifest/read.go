package manifest

import (
	"bufio"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
)

// ReadCSV reads a manifest from comma-separated text whose first line that is no
// comment (#) names the columns. name is what messages call it. The error is an
// *Error that lists up to 20 problems with line and column, or one of reading r.
func ReadCSV(name string, r io.Reader) (*Manifest, error) {
	in := bufio.NewReaderSize(r, 1<<16)
	if mark, _ := in.Peek(3); string(mark) == "\xef\xbb\xbf" { // that some editors write before the text
		in.Discard(3)
	}
	c := csv.NewReader(in)
	c.Comment, c.TrimLeadingSpace, c.FieldsPerRecord, c.ReuseRecord = '#', true, -1, true
	b := newBuilder(name, "line")
	width := 0
	for {
		cells, err := c.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			var parse *csv.ParseError
			if errors.As(err, &parse) {
				b.bad(parse.StartLine, "", "%v", parse.Err)
				break // where the next record begins is not known
			}
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		line, _ := c.FieldPos(0)
		switch {
		case width == 0:
			width = len(cells)
			b.header(line, cells)
		case len(cells) != width:
			b.bad(line, "", "it has %d cells and the first line %d", len(cells), width)
		default:
			b.add(line, cells)
		}
	}
	if width == 0 {
		b.bad(1, "", "the manifest is empty; its first line must name the columns")
	}
	if err := b.err(); err != nil {
		return nil, err
	}
	return b.m, nil
}

// FromTable makes a manifest of a table that is read elsewhere: read calls header
// with the names of the columns, and then row with as many cells for each row. name is
// what messages call it, rows count from 1. The error is an *Error, or that of
// read.
func FromTable(name string, read func(header, row func(cells []string)) error) (*Manifest, error) {
	b := newBuilder(name, "row")
	n := 0
	if err := read(func(names []string) { b.header(0, names) }, func(cells []string) {
		n++
		b.add(n, cells)
	}); err != nil {
		return nil, err
	}
	if err := b.err(); err != nil {
		return nil, err
	}
	return b.m, nil
}
