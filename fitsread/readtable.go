package fitsread

import (
	"strconv"
	"strings"
)

// ReadTable reads the columns of one value a row, as text, of the first table of a
// FITS file that has any: header is called with their names, then row with the cells
// of each row, which it must not keep. Numbers are written so that they read back as
// the same value; null, NaN and blank cells are empty, logicals are T or F. Errors are
// *ReadError.
func ReadTable(path string, header, row func(cells []string)) (err error) {
	f := &File{path: path, opts: Options{MaxPixels: 1 << 22, MaxUnpacked: 1 << 30}}
	defer f.guard(&err)
	if f.src, err = openSource(path, f.opts.MaxUnpacked); err != nil {
		return err
	}
	defer f.src.close()
	if f.hdus, err = walk(f.src, f.src.size); err != nil {
		return err
	}
	for _, h := range f.hdus {
		switch {
		case h.kind == kindPacked:
			return compressedFault(h)
		case h.kind != kindTable && h.kind != kindASCII:
			continue
		case h.broken != nil:
			return h.broken
		}
		if read, err := f.tableText(h, header, row); err != nil || read {
			return err
		}
	}
	return fault(ErrNoSpectrum, -1, "give a file with a table of one value a cell", "there is no table in it")
}

// tableText reads a table row by row; it reports false for one without a column of
// one value a row.
func (f *File) tableText(h *hdu, header, row func(cells []string)) (bool, error) {
	var cols []*column
	var names []string
	for i := range h.columns {
		if c := &h.columns[i]; !c.bad && !c.isVector() && c.repeat > 0 && strings.IndexByte("ALBIJKED", c.code) >= 0 {
			cols, names = append(cols, c), append(names, c.name)
		}
	}
	rowLen, n := h.axes[0], h.axes[1]
	if len(cols) == 0 {
		return false, nil
	}
	if err := h.need(0, rowLen*n); err != nil {
		return false, err
	}
	header(names)
	cells := make([]string, len(cols))
	step := max(tableChunk/max(rowLen, 1), 1)
	for first := int64(0); first < n; first += step {
		k := min(step, n-first)
		raw, err := f.readBytes(h, first*rowLen, k*rowLen)
		if err != nil {
			return false, err
		}
		for r := range k {
			for j, c := range cols {
				at := r*rowLen + c.offset
				cells[j] = c.cellText(raw[at:at+c.width], h.kind == kindASCII)
			}
			row(cells)
		}
	}
	return true, nil
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
