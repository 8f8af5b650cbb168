package fitsread

import (
	"strconv"
	"strings"
)

// maxTableCells bounds the cells that ReadTable returns.
const maxTableCells = 50_000_000

// ReadTable returns the columns of one value a row, as text, of the first table of
// a FITS file that has any: their names, and the cells row by row. Numbers are
// written so that they read back as the same value; null, NaN and blank cells are
// empty, logicals are T or F. Errors are *ReadError.
func ReadTable(path string) (names []string, rows [][]string, err error) {
	f := &File{path: path, opts: Options{MaxPixels: 1 << 22, MaxUnpacked: 1 << 30}}
	defer f.guard(&err)
	if f.src, err = openSource(path, f.opts.MaxUnpacked); err != nil {
		return nil, nil, err
	}
	defer f.src.close()
	if f.hdus, err = walk(f.src, f.src.size); err != nil {
		return nil, nil, err
	}
	for _, h := range f.hdus {
		switch {
		case h.kind == kindPacked:
			return nil, nil, compressedFault(h)
		case h.kind != kindTable && h.kind != kindASCII:
			continue
		case h.broken != nil:
			return nil, nil, h.broken
		}
		if names, rows, err = f.tableText(h); err != nil || len(names) > 0 {
			return names, rows, err
		}
	}
	return nil, nil, fault(ErrNoSpectrum, -1, "give a file with a table of one value a cell", "there is no table in it")
}

// tableText reads a table row by row.
func (f *File) tableText(h *hdu) (names []string, rows [][]string, err error) {
	var cols []*column
	for i := range h.columns {
		if c := &h.columns[i]; !c.bad && !c.isVector() && c.repeat > 0 && strings.IndexByte("ALBIJKED", c.code) >= 0 {
			cols, names = append(cols, c), append(names, c.name)
		}
	}
	rowLen, n := h.axes[0], h.axes[1]
	if len(cols) == 0 {
		return nil, nil, nil
	}
	if n > 0 && int64(len(cols)) > maxTableCells/n {
		return nil, nil, fault(ErrTooLarge, h.index, "split it", "the table has %d rows of %d columns", n, len(cols))
	}
	if err := h.need(0, rowLen*n); err != nil {
		return nil, nil, err
	}
	step := max(tableChunk/max(rowLen, 1), 1)
	for row := int64(0); row < n; row += step {
		k := min(step, n-row)
		raw, err := f.readBytes(h, row*rowLen, k*rowLen)
		if err != nil {
			return nil, nil, err
		}
		for r := range k {
			cells := make([]string, len(cols))
			for j, c := range cols {
				at := r*rowLen + c.offset
				cells[j] = c.cellText(raw[at:at+c.width], h.kind == kindASCII)
			}
			rows = append(rows, cells)
		}
	}
	return names, rows, nil
}

// cellText writes one value as text.
func (c *column) cellText(cell []byte, isText bool) string {
	switch {
	case isText:
		s := strings.TrimSpace(string(cell))
		if s == c.null {
			return ""
		}
		if v := c.textNumber(cell); c.code != 'A' && v == v {
			return strconv.FormatFloat(v, 'g', -1, 64)
		}
		return s
	case c.code == 'A':
		return c.text(cell)
	case c.code == 'L':
		if cell[0] == 'T' || cell[0] == 'F' {
			return string(cell[:1])
		}
		return ""
	}
	if s := c.text(cell); s != "" && c.zero == float64(int64(c.zero)) {
		return s
	}
	var v [1]float64
	c.decode(v[:], cell)
	if v[0] != v[0] {
		return ""
	}
	bits := 64
	if c.code == 'E' && c.scale == 1 && c.zero == 0 {
		bits = 32
	}
	return strconv.FormatFloat(v[0], 'g', -1, bits)
}
