package fitsread

import (
	"encoding/binary"
	"math"
	"strconv"
	"strings"
)

// column is one field of a table as its header describes it.
type column struct {
	number  int // from 1
	name    string
	form    string
	unit    string
	ucd     string
	utype   string
	comment string // of the name's card
	null    string // TNULLn as written
	code    byte   // type letter; of the elements for P and Q
	heap    byte   // 'P' or 'Q' for arrays on the heap, else 0
	repeat  int64  // elements per row; for strings the width
	offset  int64  // bytes into the row
	width   int64  // bytes in the row
	scale   float64
	zero    float64
	bad     bool // TFORM or TBCOL not understood
	flags   bool // the bits of the cell are flags of one pixel, not one bit a pixel
}

// elementSize holds the bytes of one element of each numeric TFORM letter.
var elementSize = map[byte]int64{'L': 1, 'B': 1, 'I': 2, 'J': 4, 'K': 8, 'E': 4, 'D': 8, 'A': 1, 'C': 8, 'M': 16}

// numeric reports whether the cells hold real numbers or logicals.
func (c *column) numeric() bool {
	return !c.bad && c.repeat > 0 && strings.IndexByte("LBIJKEDX", c.code) >= 0
}

// asFlags returns a column of bits as one whole number a cell, its first bit the
// lowest, for tables with a row a pixel. Other columns stay as they are.
func (c *column) asFlags(perPixel bool) *column {
	if c.code != 'X' || c.heap != 0 || !perPixel || c.repeat > 63 {
		return c
	}
	one := *c
	one.flags = true
	return &one
}

// values returns how many numbers a cell holds; 0 where only the heap knows.
func (c *column) values() int64 {
	switch {
	case c.heap != 0:
		return 0
	case c.flags:
		return 1
	}
	return c.repeat
}

// isVector reports whether a cell holds an array.
func (c *column) isVector() bool {
	return c.heap != 0 || c.repeat > 1 && c.code != 'A' && !c.flags
}

// readColumns fills h.columns from the header in one pass and checks that they
// tile the row.
func (h *hdu) readColumns() {
	fields, ok := h.header.integer("TFIELDS")
	if !ok || fields < 0 || fields > maxFields {
		h.broken = fault(ErrBadHeader, h.index, hintCopy, "TFIELDS is missing or not a number from 0 to %d", maxFields)
		return
	}
	h.columns = make([]column, fields)
	for i := range h.columns {
		h.columns[i] = column{number: i + 1, scale: 1, bad: true}
	}
	for _, c := range h.header {
		if c.key == "" || c.key[0] != 'T' {
			continue
		}
		stem, n := split(c.key)
		if n < 1 || int64(n) > fields {
			continue
		}
		col := &h.columns[n-1]
		switch stem {
		case "TTYPE":
			col.name, col.comment = strings.TrimSpace(c.value()), c.comment()
		case "TFORM":
			col.form = strings.TrimSpace(c.value())
		case "TUNIT":
			col.unit = strings.TrimSpace(c.value())
		case "TUCD":
			col.ucd = strings.ToLower(strings.TrimSpace(c.value()))
		case "TUTYP", "TUTYPE": // the standard and what some write
			col.utype = strings.ToLower(strings.TrimSpace(c.value()))
		case "TNULL":
			col.null = strings.TrimSpace(c.value())
		case "TSCAL":
			if v, ok := parseNumber(c.value()); ok && v != 0 {
				col.scale = v
			}
		case "TZERO":
			if v, ok := parseNumber(c.value()); ok {
				col.zero = v
			}
		case "TBCOL":
			if v, err := strconv.ParseInt(c.value(), 10, 64); err == nil {
				col.offset = v - 1
			}
		}
	}
	if h.kind == kindASCII {
		h.readTextForms()
		return
	}
	var at int64
	for i := range h.columns {
		col := &h.columns[i]
		col.offset = at
		if !col.readForm() {
			h.broken = fault(ErrBadHeader, h.index, "repair the header", "TFORM%d = %q is not a column format", col.number, col.form).at(col.name, -1)
			return
		}
		at += col.width
	}
	if at != h.axes[0] {
		h.broken = fault(ErrBadHeader, h.index, hintCopy, "the columns take %d bytes a row, NAXIS1 says %d", at, h.axes[0])
	}
}

// readForm takes rT, rPt(max) and rQt(max) apart, FITS standard 4.0, table 18.
func (c *column) readForm() bool {
	f := strings.ToUpper(c.form)
	i := 0
	for i < len(f) && f[i] >= '0' && f[i] <= '9' {
		i++
	}
	c.repeat = 1
	if i > 0 {
		n, err := strconv.ParseInt(f[:i], 10, 64)
		if err != nil || n > math.MaxInt32 {
			return false
		}
		c.repeat = n
	}
	if i == len(f) {
		return false
	}
	c.code = f[i]
	switch c.code {
	case 'P', 'Q':
		if c.repeat > 1 || i+1 == len(f) || elementSize[f[i+1]] == 0 && f[i+1] != 'X' {
			return false
		}
		c.heap, c.code = c.code, f[i+1]
		c.width = c.repeat * 8
		if c.heap == 'Q' {
			c.width = c.repeat * 16
		}
	case 'X':
		c.width = (c.repeat + 7) / 8
	default:
		size := elementSize[c.code]
		if size == 0 {
			return false
		}
		c.width = c.repeat * size
	}
	c.bad = false
	return true
}

// readTextForms takes Iw, Fw.d, Ew.d, Dw.d and Aw of an ASCII table apart.
func (h *hdu) readTextForms() {
	for i := range h.columns {
		c := &h.columns[i]
		if c.form == "" {
			continue
		}
		w, _, _ := strings.Cut(c.form[1:], ".")
		width, err := strconv.ParseInt(w, 10, 64)
		letter := strings.ToUpper(c.form[:1])
		if err != nil || width < 1 || !strings.Contains("IFEDA", letter) ||
			c.offset < 0 || c.offset > h.axes[0]-width {
			continue
		}
		c.code, c.width, c.repeat, c.bad = 'D', width, 1, false
		if letter == "A" {
			c.code, c.repeat = 'A', width
		}
	}
}

// decode fills dst with the elements of one cell; len(dst) is their number. Null
// values become NaN, logicals 1 and 0, TSCAL and TZERO are applied.
func (c *column) decode(dst []float64, cell []byte) {
	switch c.code {
	case 'E':
		for i := range dst {
			dst[i] = float64(math.Float32frombits(binary.BigEndian.Uint32(cell[4*i:])))
		}
	case 'D':
		for i := range dst {
			dst[i] = math.Float64frombits(binary.BigEndian.Uint64(cell[8*i:]))
		}
	case 'L':
		for i := range dst {
			dst[i] = logical(cell[i])
		}
		return
	case 'X':
		c.bits(dst, cell)
		return
	default:
		null, hasNull := c.nullValue()
		unsigned := c.code == 'K' && c.zero == 1<<63 && c.scale == 1 // exact, where adding 2^63 to a float64 is not
		for i := range dst {
			v := c.integer(cell, i)
			if hasNull && v == null {
				dst[i] = math.NaN()
				continue
			}
			dst[i] = float64(v)
			if unsigned {
				dst[i] = float64(uint64(v) ^ 1<<63)
			}
		}
		if unsigned {
			return
		}
	}
	c.rescale(dst)
}

// rescale applies TSCAL and TZERO, or BSCALE and BZERO.
func (c *column) rescale(v []float64) {
	if c.scale != 1 || c.zero != 0 {
		for i := range v {
			v[i] = v[i]*c.scale + c.zero
		}
	}
}

// bits decodes a cell of bits, the high bit of the first byte first.
func (c *column) bits(dst []float64, cell []byte) {
	bit := func(i int) byte { return cell[i/8] >> (7 - i%8) & 1 }
	if !c.flags {
		for i := range dst {
			dst[i] = float64(bit(i))
		}
		return
	}
	var v uint64
	for i := range int(c.repeat) {
		v |= uint64(bit(i)) << i
	}
	dst[0] = float64(v)
}

func logical(b byte) float64 {
	switch b {
	case 'T':
		return 1
	case 'F':
		return 0
	}
	return math.NaN()
}

func (c *column) nullValue() (int64, bool) {
	if c.null == "" {
		return 0, false
	}
	n, err := strconv.ParseInt(c.null, 10, 64)
	return n, err == nil
}

// integer returns element i of an integer cell as stored.
func (c *column) integer(cell []byte, i int) int64 {
	switch c.code {
	case 'I':
		return int64(int16(binary.BigEndian.Uint16(cell[2*i:])))
	case 'J':
		return int64(int32(binary.BigEndian.Uint32(cell[4*i:])))
	case 'K':
		return int64(binary.BigEndian.Uint64(cell[8*i:]))
	}
	return int64(cell[i]) // B, unsigned
}

// textNumber reads one field of an ASCII table; blank and TNULL are NaN.
func (c *column) textNumber(field []byte) float64 {
	s := strings.TrimSpace(string(field))
	if s == "" || s == c.null {
		return math.NaN()
	}
	v, ok := parseNumber(s)
	if !ok {
		return math.NaN()
	}
	return v*c.scale + c.zero
}

// text returns a cell as an identifier: strings without padding, whole numbers
// exactly (also unsigned 64-bit ones, whose TZERO is 2^63).
func (c *column) text(cell []byte) string {
	switch c.code {
	case 'A':
		s, _, _ := strings.Cut(string(cell), "\x00")
		return strings.TrimSpace(s)
	case 'B', 'I', 'J', 'K':
		if c.isVector() || c.scale != 1 || len(cell) == 0 {
			return ""
		}
		v := c.integer(cell, 0)
		if null, ok := c.nullValue(); ok && v == null {
			return ""
		}
		if c.code == 'K' && c.zero == 1<<63 {
			return strconv.FormatUint(uint64(v)^(1<<63), 10)
		}
		return strconv.FormatInt(v+int64(c.zero), 10)
	}
	return ""
}
