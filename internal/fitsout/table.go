package fitsout

import (
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Kind is the data type of a table column, by its TFORM letter (section
// 7.3.1, table 18).
type Kind byte

// The column types.
const (
	Logical Kind = 'L'
	Byte    Kind = 'B'
	Int16   Kind = 'I'
	Int32   Kind = 'J'
	Int64   Kind = 'K'
	Float32 Kind = 'E'
	Float64 Kind = 'D'
	Text    Kind = 'A'
)

func (k Kind) size() int {
	switch k {
	case Logical, Byte, Text:
		return 1
	case Int16:
		return 2
	case Int32, Float32:
		return 4
	case Int64, Float64:
		return 8
	}
	return 0
}

// Column describes one column. All but Name and Kind may be left out.
type Column struct {
	Name    string // TTYPEn: letters, digits and underscore
	Kind    Kind
	Repeat  int    // values in a cell, for Text the width in bytes; 0 means 1
	Dim     []int  // TDIMn, axes of a cell; their product is Repeat
	Unit    string // TUNITn, section 4.3
	UCD     string // TUCDn, IVOA UCD1+
	Utype   string // TUTYPn, IVOA utype
	Display string // TDISPn, table 20
	Comment string // TCOMMn
	Null    *int64 // TNULLn, for integer columns
}

func (c *Column) repeat() int { return max(c.Repeat, 1) }

func (c *Column) width() int { return c.repeat() * c.Kind.size() }

func (c *Column) integer() bool {
	return c.Kind == Byte || c.Kind == Int16 || c.Kind == Int32 || c.Kind == Int64
}

// ErrCell is wrapped by errors about a value that does not fit its column.
var ErrCell = errors.New("FITS table cell")

// Table writes the rows of a binary table. For every row call one setter a
// column, in the order of the columns, then EndRow. The first problem is kept
// and returned by EndRow and Close.
type Table struct {
	u    *hdu
	cols []Column
	row  []byte
	next int // column to be set
	rows int64
	err  error
}

// Table begins a binary table extension. Rows are streamed: their number is
// written into the header at Close.
func (w *Writer) Table(h *Header, name string, cols []Column) (*Table, error) {
	if w.err != nil {
		return nil, w.err
	}
	cards, width, err := columnCards(cols)
	if err != nil {
		return nil, w.fail(fmt.Errorf("FITS table %q: %w", name, err))
	}
	u, err := w.begin(structure{bitpix: 8, axes: []int64{int64(width), 0}, name: name, table: true,
		fields: len(cols), cards: cards}, h)
	if err != nil {
		return nil, err
	}
	return &Table{u: u, cols: append([]Column(nil), cols...), row: make([]byte, 0, width)}, nil
}

func columnCards(cols []Column) (cards []string, width int, err error) {
	if len(cols) == 0 || len(cols) > 999 {
		return nil, 0, fmt.Errorf("%w: %d columns, want 1 to 999", ErrHeader, len(cols))
	}
	var errs []error
	seen := map[string]bool{}
	for i := range cols {
		c := &cols[i]
		if err := c.check(); err != nil {
			errs = append(errs, fmt.Errorf("%w: column %d %q: %w", ErrHeader, i+1, c.Name, err))
			continue
		}
		if key := strings.ToLower(c.Name); seen[key] {
			errs = append(errs, fmt.Errorf("%w: column %d: name %q is used twice (case does not count)", ErrHeader, i+1, c.Name))
		} else {
			seen[key] = true
		}
		width += c.width()
		text := func(key, value string) {
			if value != "" {
				cards = append(cards, textCards(key+strconv.Itoa(i+1), value, "")...)
			}
		}
		text("TTYPE", c.Name)
		text("TFORM", strconv.Itoa(c.repeat())+string(c.Kind))
		text("TDIM", dimText(c.Dim))
		text("TUNIT", c.Unit)
		text("TDISP", c.Display)
		if c.Null != nil {
			cards = append(cards, fixedCard("TNULL"+strconv.Itoa(i+1), strconv.FormatInt(*c.Null, 10), ""))
		}
		text("TUCD", c.UCD)
		text("TUTYP", c.Utype)
		text("TCOMM", c.Comment)
	}
	return cards, width, errors.Join(errs...)
}

func (c *Column) check() error {
	switch {
	case c.Name == "" || len(c.Name) > maxString:
		return fmt.Errorf("name of %d characters, want 1 to %d", len(c.Name), maxString)
	case c.Kind.size() == 0:
		return fmt.Errorf("kind %q is not a column type", c.Kind)
	case c.Repeat < 0:
		return fmt.Errorf("repeat count %d", c.Repeat)
	case c.Kind == Logical && c.Repeat > 1:
		return errors.New("a logical column holds one value a cell; use Byte for a vector")
	case c.Null != nil && !c.integer():
		return errors.New("a null value is for integer columns")
	}
	for _, r := range c.Name {
		if !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || r == '_') {
			return fmt.Errorf("name has %q, want letters, digits and underscore", r)
		}
	}
	for _, s := range []string{c.Unit, c.UCD, c.Utype, c.Display, c.Comment} {
		if badByte(s) >= 0 {
			return fmt.Errorf("%q is not printable ASCII", s)
		}
	}
	if len(c.Dim) > 0 {
		n := 1
		for _, d := range c.Dim {
			n *= d
		}
		if n != c.repeat() {
			return fmt.Errorf("axes %v do not make %d values", c.Dim, c.repeat())
		}
	}
	return nil
}

func dimText(dim []int) string {
	if len(dim) == 0 {
		return ""
	}
	parts := make([]string, len(dim))
	for i, d := range dim {
		parts[i] = strconv.Itoa(d)
	}
	return "(" + strings.Join(parts, ",") + ")"
}

// column returns the column to be set next, nil after a problem.
func (t *Table) column(what string, n int) *Column {
	if t.err != nil {
		return nil
	}
	if t.next >= len(t.cols) {
		t.fail("more values than the %d columns", len(t.cols))
		return nil
	}
	c := &t.cols[t.next]
	if c.Kind != Text && n != c.repeat() {
		t.fail("%d %s for a cell of %d", n, what, c.repeat())
		return nil
	}
	t.next++
	return c
}

// fail keeps the first problem, with the row and column it is about.
func (t *Table) fail(format string, args ...any) {
	name := ""
	if t.next < len(t.cols) {
		name = t.cols[t.next].Name
	}
	t.err = t.u.w.fail(fmt.Errorf("%w: table %q, row %d, column %q: %w", ErrCell, t.u.shape.name, t.rows+1, name, fmt.Errorf(format, args...)))
}

// mismatch reports a value of the wrong type for the column just taken.
func (t *Table) mismatch(what string, c *Column) {
	t.next--
	t.fail("%s for a column of type %c", what, c.Kind)
}

// Text sets a text cell: printable ASCII, at most Repeat bytes, filled up with
// NUL. A trailing blank would be lost by readers (see ASCII).
func (t *Table) Text(s string) {
	c := t.column("texts", 1)
	switch {
	case c == nil:
	case c.Kind != Text:
		t.mismatch("text", c)
	case len(s) > c.repeat():
		t.next--
		t.fail("text of %d bytes for a width of %d", len(s), c.repeat())
	case badByte(s) >= 0:
		t.next--
		t.fail("text %q is not printable ASCII", s)
	default:
		t.row = append(t.row, s...)
		for i := len(s); i < c.repeat(); i++ {
			t.row = append(t.row, 0)
		}
	}
}

// Bool sets a logical cell.
func (t *Table) Bool(v bool) {
	c := t.column("logical values", 1)
	switch {
	case c == nil:
	case c.Kind != Logical:
		t.mismatch("logical value", c)
	default:
		t.row = append(t.row, boolText(v)...)
	}
}

// Int sets an integer cell; a value outside the range of the column's type is
// an error.
func (t *Table) Int(v int64) {
	if c := t.column("integers", 1); c != nil {
		t.integer(c, v)
	}
}

// Ints sets a vector of integers.
func (t *Table) Ints(values []int64) {
	c := t.column("integers", len(values))
	for i := 0; c != nil && i < len(values) && t.err == nil; i++ {
		t.integer(c, values[i])
	}
}

func (t *Table) integer(c *Column, v int64) {
	switch {
	case c.Kind == Byte && v >= 0 && v <= math.MaxUint8:
		t.row = append(t.row, byte(v))
	case c.Kind == Int16 && v == int64(int16(v)):
		t.row = binary.BigEndian.AppendUint16(t.row, uint16(v))
	case c.Kind == Int32 && v == int64(int32(v)):
		t.row = binary.BigEndian.AppendUint32(t.row, uint32(v))
	case c.Kind == Int64:
		t.row = binary.BigEndian.AppendUint64(t.row, uint64(v))
	default:
		t.mismatch("integer "+strconv.FormatInt(v, 10), c)
	}
}

// Float sets a cell of a Float32 (rounded) or Float64 column. NaN is null
// (section 7.3.3).
func (t *Table) Float(v float64) {
	if c := t.column("numbers", 1); c != nil {
		t.float(c, v)
	}
}

// Floats sets a vector of numbers.
func (t *Table) Floats(values []float64) {
	c := t.column("numbers", len(values))
	for i := 0; c != nil && i < len(values) && t.err == nil; i++ {
		t.float(c, values[i])
	}
}

func (t *Table) float(c *Column, v float64) {
	switch c.Kind {
	case Float32:
		t.row = binary.BigEndian.AppendUint32(t.row, math.Float32bits(float32(v)))
	case Float64:
		t.row = binary.BigEndian.AppendUint64(t.row, math.Float64bits(v))
	default:
		t.mismatch("number", c)
	}
}

// EndRow writes the row. Every column must have been set.
func (t *Table) EndRow() error {
	if t.err == nil && t.next < len(t.cols) {
		t.fail("not set")
	}
	if t.err != nil {
		return t.err
	}
	if err := t.u.write(t.row); err != nil {
		t.err = err
		return err
	}
	t.row, t.next = t.row[:0], 0
	t.rows++
	return nil
}

// Close completes the table and fills in the number of rows and the checksums.
func (t *Table) Close() error {
	if t.err == nil && t.next > 0 {
		t.fail("the row was not ended")
	}
	if t.err != nil {
		return t.err
	}
	t.err = errors.New("FITS table is closed")
	t.u.shape.axes[1] = t.rows
	return t.u.finish()
}
