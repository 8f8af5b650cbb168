package fitsread

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"io"
	"math"

	"github.com/astrogo/fitsio"
)

// readBytes reads n bytes of the data of h from position from on.
func (f *File) readBytes(h *hdu, from, n int64) ([]byte, error) {
	if err := h.need(from, n); err != nil {
		return nil, err
	}
	if h.packed != nil {
		return f.packedBytes(h, from, n)
	}
	buf := make([]byte, n)
	k, err := f.src.ReadAt(buf, h.offset+from)
	switch {
	case err != nil && err != io.EOF:
		return nil, fault(err, h.index, hintCopy, "%d bytes of data cannot be read: %v", n, err)
	case int64(k) < n:
		return nil, fault(ErrChanged, h.index, "process it again when it is complete", "the file became shorter while it was read")
	}
	return buf, nil
}

// tableChunk bounds the bytes of a table that are in memory at once.
const tableChunk = 4 << 20

// scalarColumns reads whole columns of one value a row.
func (f *File) scalarColumns(h *hdu, cols []*column) ([][]float64, error) {
	rowLen, rows := h.axes[0], h.axes[1]
	if err := f.checkPixels(h, rows); err != nil {
		return nil, err
	}
	if err := h.need(0, rowLen*rows); err != nil {
		return nil, err
	}
	out := make([][]float64, len(cols))
	for k := range out {
		out[k] = make([]float64, rows)
	}
	step := max(tableChunk/max(rowLen, 1), 1)
	for row := int64(0); row < rows; row += step {
		n := min(step, rows-row)
		raw, err := f.readBytes(h, row*rowLen, n*rowLen)
		if err != nil {
			return nil, err
		}
		for k, c := range cols {
			c.gather(out[k][row:row+n], raw, int(rowLen), h.kind == kindASCII)
		}
	}
	return out, nil
}

// gather decodes one value a row out of whole rows.
func (c *column) gather(dst []float64, raw []byte, rowLen int, isText bool) {
	at := int(c.offset)
	switch {
	case isText:
		for i := range dst {
			dst[i] = c.textNumber(raw[at : at+int(c.width)])
			at += rowLen
		}
		return
	case c.code == 'E' && c.scale == 1 && c.zero == 0:
		for i := range dst {
			dst[i] = float64(math.Float32frombits(binary.BigEndian.Uint32(raw[at:])))
			at += rowLen
		}
	case c.code == 'D' && c.scale == 1 && c.zero == 0:
		for i := range dst {
			dst[i] = math.Float64frombits(binary.BigEndian.Uint64(raw[at:]))
			at += rowLen
		}
	default:
		for i := range dst {
			c.decode(dst[i:i+1], raw[at:at+int(c.width)])
			at += rowLen
		}
	}
}

// cell reads the array in one cell of a vector column, on the heap or in the row.
func (f *File) cell(h *hdu, c *column, row int64) ([]float64, error) {
	raw, n, err := f.cellBytes(h, c, row)
	if err != nil {
		return nil, err
	}
	out := make([]float64, n)
	if h.kind == kindASCII {
		out[0] = c.textNumber(raw)
		return out, nil
	}
	c.decode(out, raw)
	return out, nil
}

// cellBytes returns the bytes of a cell and its number of elements. Heap
// descriptors are checked against the heap before anything is read by them.
func (f *File) cellBytes(h *hdu, c *column, row int64) ([]byte, int64, error) {
	if row < 0 || row >= h.axes[1] {
		return nil, 0, fault(ErrLayout, h.index, "correct the layout", "there is no row %d in a table of %d rows", row, h.axes[1]).at(c.name, -1)
	}
	if err := f.checkPixels(h, c.repeat); err != nil {
		return nil, 0, err
	}
	if c.heap != 0 {
		return f.heapBytes(h, c, row, h.axes[0], h.axes[1])
	}
	raw, err := f.readBytes(h, row*h.axes[0]+c.offset, c.width)
	return raw, c.values(), err
}

// heapBytes returns the bytes of an array on the heap and its number of elements,
// in a table of rows of rowLen bytes.
func (f *File) heapBytes(h *hdu, c *column, row, rowLen, rows int64) ([]byte, int64, error) {
	raw, err := f.readBytes(h, row*rowLen+c.offset, c.width)
	if err != nil {
		return nil, 0, err
	}
	var n, at uint64
	switch {
	case c.repeat == 0:
		return nil, 0, nil
	case c.heap == 'P':
		n, at = uint64(binary.BigEndian.Uint32(raw)), uint64(binary.BigEndian.Uint32(raw[4:]))
	default:
		n, at = binary.BigEndian.Uint64(raw), binary.BigEndian.Uint64(raw[8:])
	}
	if n > math.MaxInt32 || at > math.MaxInt64/2 {
		return nil, 0, fault(ErrBadHeader, h.index, hintCopy, "the cell's descriptor claims %d elements", n).at(c.name, int(row))
	}
	if err := f.checkPixels(h, int64(n)); err != nil {
		return nil, 0, err
	}
	heap := rowLen * rows
	if v, ok := h.header.integer("THEAP"); ok && v >= heap {
		heap = v
	}
	if heap > math.MaxInt64/2 {
		return nil, 0, fault(ErrBadHeader, h.index, hintCopy, "THEAP lies outside the data")
	}
	size := int64(n) * elementSize[c.code]
	if c.code == 'X' {
		size = int64(n+7) / 8
	}
	raw, err = f.readBytes(h, heap+int64(at), size)
	return raw, int64(n), err
}

// imageCode has the TFORM letter of the pixels of every BITPIX.
var imageCode = map[int]byte{8: 'B', 16: 'I', 32: 'J', 64: 'K', -32: 'E', -64: 'D'}

// imageLine reads n pixels of an image from pixel first on, with BSCALE, BZERO
// and BLANK applied. All of an image at once goes through fitsio.
func (f *File) imageLine(h *hdu, first, n int64) ([]float64, error) {
	if err := f.checkPixels(h, n); err != nil {
		return nil, err
	}
	if h.turned {
		return f.turnedLines(h, first, n)
	}
	c := column{scale: 1, code: imageCode[h.bitpix]}
	if v, ok := h.header.number("BSCALE"); ok && v != 0 {
		c.scale = v
	}
	if v, ok := h.header.number("BZERO"); ok {
		c.zero = v
	}
	if h.tiles != nil {
		out, err := f.tilePixels(h, first, n)
		c.rescale(out)
		return out, err
	}
	c.null = h.header.text("BLANK")
	size := int64(abs(h.bitpix)) / 8
	if err := h.need(first*size, n*size); err != nil {
		return nil, err
	}
	var raw []byte
	var err error
	if first == 0 && n == h.pixels()*h.lines() {
		raw, err = f.wholeImage(h)
	} else {
		raw, err = f.readBytes(h, first*size, n*size)
	}
	if err != nil {
		return nil, err
	}
	out := make([]float64, n)
	c.decode(out, raw)
	return out, nil
}

// turnedLines reads whole lines of an image whose lines run along its second axis.
func (f *File) turnedLines(h *hdu, first, n int64) ([]float64, error) {
	straight := *h
	straight.turned = false
	v, err := f.imageLine(&straight, 0, h.pixels()*h.lines())
	if err != nil {
		return nil, err
	}
	out := make([]float64, n)
	for i := range out {
		line, x := (first+int64(i))/h.pixels(), (first+int64(i))%h.pixels()
		out[i] = v[x*h.lines()+line]
	}
	return out, nil
}

// checkPixels refuses arrays longer than the limit before they are allocated.
func (f *File) checkPixels(h *hdu, n int64) *ReadError {
	if n > int64(f.opts.MaxPixels) {
		return fault(ErrTooLarge, h.index, "check the header, or raise the limit",
			"an array of %d pixels is longer than the limit of %d", n, f.opts.MaxPixels)
	}
	return nil
}

// structuralHeader writes a header of nothing but structure, the only kind that
// is given to fitsio: what else stands in headers from outside can stop it.
func structuralHeader(cards ...string) []byte {
	var b bytes.Buffer
	for _, c := range append(cards, "END") {
		fmt.Fprintf(&b, "%-*s", cardLen, c)
	}
	for b.Len()%blockLen != 0 {
		b.WriteByte(' ')
	}
	return b.Bytes()
}

func structuralCard(key string, value any) string {
	if s, ok := value.(string); ok {
		return fmt.Sprintf("%-8s= '%-8s'", key, s)
	}
	return fmt.Sprintf("%-8s= %20v", key, value)
}

// decodeHDU runs fitsio's decoder over a structural header and its data.
func decodeHDU(head []byte, data io.Reader) (unit fitsio.HDU, err error) {
	defer func() {
		if r := recover(); r != nil {
			unit, err = nil, fmt.Errorf("decoder stopped: %v", r)
		}
	}()
	return fitsio.NewDecoder(io.MultiReader(bytes.NewReader(head), data)).DecodeHDU()
}

// wholeImage returns all pixel bytes of an image, decoded by fitsio as one line.
func (f *File) wholeImage(h *hdu) ([]byte, error) {
	n := h.pixels() * h.lines()
	head := structuralHeader("SIMPLE  =                    T", structuralCard("BITPIX", h.bitpix),
		structuralCard("NAXIS", 1), structuralCard("NAXIS1", n))
	padding := bytes.NewReader(make([]byte, blockLen)) // may be missing at the end of a file
	data := io.MultiReader(io.NewSectionReader(f.src, h.offset, h.length), padding)
	unit, err := decodeHDU(head, data)
	if err != nil {
		return nil, fault(ErrBadData, h.index, hintCopy, "the image cannot be decoded: %v", err)
	}
	img, ok := unit.(fitsio.Image)
	if !ok || int64(len(img.Raw())) != n*int64(abs(h.bitpix))/8 {
		return nil, fault(ErrBadData, h.index, hintCopy, "the image does not decode to %d pixels", n)
	}
	return img.Raw(), nil
}

// confirm has fitsio read the structure of the columns in use and refuses the
// table where it sees other types than we do: two readers that disagree on a
// format would give numbers that mean nothing.
func confirm(h *hdu, cols []*column) error {
	cards := []string{structuralCard("XTENSION", "BINTABLE"), structuralCard("BITPIX", 8),
		structuralCard("NAXIS", 2), structuralCard("NAXIS1", 0), structuralCard("NAXIS2", 0),
		structuralCard("PCOUNT", 0), structuralCard("GCOUNT", 1), structuralCard("TFIELDS", len(cols))}
	for i, c := range cols {
		form := fmt.Sprintf("%d%c", c.repeat, c.code)
		if c.heap != 0 {
			form = fmt.Sprintf("1%c%c(1)", c.heap, c.code)
		}
		cards = append(cards, structuralCard(fmt.Sprintf("TTYPE%d", i+1), fmt.Sprintf("C%d", i+1)),
			structuralCard(fmt.Sprintf("TFORM%d", i+1), form))
	}
	unit, err := decodeHDU(structuralHeader(cards...), bytes.NewReader(nil))
	if err != nil {
		return fault(ErrBadHeader, h.index, hintCopy, "the table's structure cannot be decoded: %v", err)
	}
	table, ok := unit.(*fitsio.Table)
	if !ok || table.NumCols() != len(cols) {
		return fault(ErrBadHeader, h.index, hintCopy, "the table's structure decodes to other columns")
	}
	for i, c := range cols {
		got := table.Col(i).Type()
		if c.heap == 0 && c.repeat > 0 && int64(got.Size()) != c.width {
			return fault(ErrBadHeader, h.index, hintCopy, "format %q means %d bytes or %d", c.form, c.width, got.Size()).at(c.name, -1)
		}
	}
	return nil
}
