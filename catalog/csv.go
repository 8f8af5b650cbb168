package catalog

import (
	"bufio"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// CSV writes rows as comma-separated values after RFC 4180 (Shafranovich
// 2005): UTF-8, a header line of column names, lines ended by CR LF. Numbers
// have the fixed decimals of their column's display format; one that is not
// known is an empty field.
type CSV[T Row] struct {
	table[T]
	out  *bufio.Writer
	line []byte
}

// NewCSV writes the header line.
func NewCSV[T Row](w io.Writer) (*CSV[T], error) {
	c := &CSV[T]{table: tableOf[T](), out: bufio.NewWriterSize(w, 1<<16)}
	for i := range c.columns {
		c.line = append(c.line, c.columns[i].Name...)
		c.line = append(c.line, ',')
	}
	return c, c.end()
}

// end replaces the last comma by the line's end and hands the line over.
func (c *CSV[T]) end() error {
	c.line = append(c.line[:len(c.line)-1], "\r\n"...)
	_, err := c.out.Write(c.line)
	c.line = c.line[:0]
	if err != nil {
		return fmt.Errorf("writing CSV table %s: %w", c.name, err)
	}
	return nil
}

// Write adds a row that passes Check.
func (c *CSV[T]) Write(row *T) error {
	if err := c.verify(row); err != nil {
		return err
	}
	for i := range c.columns {
		col := &c.columns[i]
		field := col.field(row)
		switch col.Type {
		case "text":
			c.line = appendQuoted(c.line, textOf(field))
		case "float64":
			layout, n := decimals(col.Display)
			c.line = appendFloat(c.line, *field.(*float64), layout, n)
		default:
			c.line = strconv.AppendInt(c.line, intOf(field), 10)
		}
		c.line = append(c.line, ',')
	}
	return c.end()
}

// Close hands over what is buffered. It does not close the underlying file.
func (c *CSV[T]) Close() error {
	if err := c.out.Flush(); err != nil {
		return fmt.Errorf("writing CSV table %s: %w", c.name, err)
	}
	return nil
}

// appendQuoted encloses s in quotes where it holds a comma or a quote, or
// where a blank at an edge could be lost. Text has no line breaks (CleanText).
func appendQuoted(b []byte, s string) []byte {
	if !strings.ContainsAny(s, `,"`) && strings.TrimSpace(s) == s {
		return append(b, s...)
	}
	b = append(b, '"')
	b = append(b, strings.ReplaceAll(s, `"`, `""`)...)
	return append(b, '"')
}

// ErrCSV is wrapped by every error about the content of a CSV table.
var ErrCSV = errors.New("catalog CSV")

// CSVReader reads what CSV wrote. Numbers come back with the decimals that
// were written. Errors give the line and column.
type CSVReader[T Row] struct {
	table[T]
	in *csv.Reader
}

// NewCSVReader reads the header line, which must name the columns of the
// table in their order, or the first of them: columns are only ever appended, and a
// table of an earlier program lacks the last.
func NewCSVReader[T Row](r io.Reader) (*CSVReader[T], error) {
	c := &CSVReader[T]{tableOf[T](), csv.NewReader(r)}
	c.in.ReuseRecord = true
	names, err := c.in.Read() // later records must have as many fields
	if err != nil {
		return nil, fmt.Errorf("%w: table %s: header line: %w", ErrCSV, c.name, err)
	}
	if len(names) > len(c.columns) {
		return nil, fmt.Errorf("%w: table %s: %d columns, want at most %d", ErrCSV, c.name, len(names), len(c.columns))
	}
	for i, name := range names {
		if name != c.columns[i].Name {
			return nil, fmt.Errorf("%w: table %s: column %d is %q, want %q", ErrCSV, c.name, i+1, name, c.columns[i].Name)
		}
	}
	return c, nil
}

// Next reads one row; io.EOF after the last.
func (c *CSVReader[T]) Next(row *T) error {
	values, err := c.in.Read()
	if err == io.EOF {
		return io.EOF
	}
	if err != nil {
		return fmt.Errorf("%w: table %s: %w", ErrCSV, c.name, err)
	}
	for i, value := range values {
		if err := parseField(c.columns[i].field(row), value); err != nil {
			line, _ := c.in.FieldPos(i)
			return fmt.Errorf("%w: table %s: line %d, column %s: %w", ErrCSV, c.name, line, c.columns[i].Name, err)
		}
	}
	for i := len(values); i < len(c.columns); i++ {
		forget(c.columns[i].field(row))
	}
	if err := c.verify(row); err != nil {
		line, _ := c.in.FieldPos(0)
		return fmt.Errorf("%w: line %d: %w", ErrCSV, line, err)
	}
	return nil
}

func parseField(field any, value string) error {
	switch p := field.(type) {
	case *float64:
		if value == "" {
			*p = math.NaN()
			return nil
		}
		v, err := strconv.ParseFloat(value, 64)
		*p = v
		return err
	case *int64:
		v, err := strconv.ParseInt(value, 10, 64)
		*p = v
		return err
	case *int32, *Flags, *AbsorberFlags:
		v, err := strconv.ParseInt(value, 10, 32)
		setInt(field, v)
		return err
	}
	// A copy, so that a short text does not keep its whole line in memory.
	return setText(field, strings.Clone(value))
}
