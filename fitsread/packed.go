package fitsread

import (
	"encoding/binary"
	"fmt"
	"math"
	"strings"
	"sync"
)

// packed is a table compressed in tiles of rows (FITS standard 4.0, section 10.3):
// a table with a tile a row, and in each column the bytes of that column of the
// tile, one after the other, compressed. It is unpacked whole, in memory, when a
// byte of it is first asked for.
type packed struct {
	raw      *hdu // as it stands in the file
	methods  []string
	tileRows int64
	size     int64 // of the table, unpacked
	unpack   func(f *File) ([]byte, error)
}

// readPacked turns a compressed table into the table that it holds. One with
// arrays on the heap, or of a method that is not known here, stays what it is and
// is refused where it is needed. h.broken says what contradicts itself.
func (h *hdu) readPacked() {
	raw := *h
	raw.kind = kindTable
	if raw.readColumns(); raw.broken != nil {
		h.broken = raw.broken
		return
	}
	raw.kind = kindPacked
	bad := func(format string, args ...any) {
		h.broken = fault(ErrBadHeader, h.index, hintCopy, "the compressed table is not described right: "+format, args...)
	}
	p := &packed{raw: &raw}
	rowLen, ok1 := h.header.integer("ZNAXIS1")
	rows, ok2 := h.header.integer("ZNAXIS2")
	var ok3 bool
	if p.tileRows, ok3 = h.header.integer("ZTILELEN"); !ok3 {
		p.tileRows = rows
	}
	tiles := raw.axes[1]
	switch have := h.length - h.missing; {
	case !ok1 || !ok2 || rowLen < 0 || rows < 0 || rowLen > math.MaxInt32 || rows > math.MaxInt32:
		bad("ZNAXIS1 or ZNAXIS2 is missing or no size")
		return
	case p.tileRows < 1 && rows > 0:
		bad("ZTILELEN = %d", p.tileRows)
		return
	case rows > 0 && (rows+p.tileRows-1)/p.tileRows != tiles:
		bad("%d rows in tiles of %d, and %d tiles", rows, p.tileRows, tiles)
		return
	case rowLen*rows/compressionLimit > have:
		bad("%d bytes cannot come out of %d", rowLen*rows, have)
		return
	}
	p.size = rowLen * rows
	header := append(header{}, h.header...)
	for i := range header {
		if stem, n := split(header[i].key); stem == "TFORM" && n >= 1 && n <= len(raw.columns) {
			form, ok := h.header.find(fmt.Sprintf("ZFORM%d", n))
			if !ok {
				bad("ZFORM%d is missing", n)
				return
			}
			header[i].rest, header[i].long = form.rest, form.long
		}
	}
	plain := *h
	plain.header, plain.axes = header, []int64{rowLen, rows}
	if plain.kind = kindTable; rows == 0 {
		plain.axes[0] = rowLen
	}
	if plain.readColumns(); plain.broken != nil {
		h.broken = plain.broken
		return
	}
	for i := range plain.columns {
		c := &plain.columns[i]
		method := strings.ToUpper(h.header.text(fmt.Sprintf("ZCTYP%d", i+1)))
		switch {
		case raw.columns[i].heap == 0 || raw.columns[i].code != 'B':
			bad("TFORM%d is none of compressed bytes", i+1)
			return
		case c.heap != 0:
			return // refused by name
		case method != "GZIP_1" && method != "GZIP_2" && method != "NOCOMPRESS" && (method != "RICE_1" || strings.IndexByte("BIJ", c.code) < 0):
			return
		case c.code == 'C' || c.code == 'M':
			c.bad = true // nothing here reads complex numbers
		}
		p.methods = append(p.methods, method)
	}
	columns := plain.columns
	var once sync.Mutex
	var table []byte
	p.unpack = func(f *File) ([]byte, error) {
		once.Lock()
		defer once.Unlock()
		if table == nil {
			all, err := p.table(f, columns, rowLen, rows)
			if err != nil {
				return nil, err
			}
			table = all
		}
		return table, nil
	}
	h.header, h.axes, h.columns, h.kind, h.packed = plain.header, plain.axes, plain.columns, kindTable, p
}

// table unpacks all tiles. The whole is bounded as gzipped files are.
func (p *packed) table(f *File, columns []column, rowLen, rows int64) ([]byte, error) {
	if p.size > f.opts.MaxUnpacked {
		return nil, fault(ErrTooLarge, p.raw.index, unpackHint, "the compressed table unpacks to %d bytes, the limit is %d", p.size, f.opts.MaxUnpacked)
	}
	quiet := *f
	quiet.opts.MaxPixels = math.MaxInt32 // the file's size bounds the bytes of a cell
	src := *f.src
	if heard, ok := src.ReaderAt.(*recording); ok {
		src.ReaderAt = heard.ReaderAt // what is unpacked is digested, when it is read
	}
	quiet.src = &src
	out := make([]byte, p.size)
	for tile := range p.raw.axes[1] {
		first := tile * p.tileRows
		n := min(p.tileRows, rows-first)
		for i := range columns {
			c := &columns[i]
			if c.bad || c.width == 0 || n <= 0 {
				continue
			}
			raw, _, err := quiet.heapBytes(p.raw, &p.raw.columns[i], tile, p.raw.axes[0], p.raw.axes[1])
			if err != nil {
				return nil, err
			}
			cells, err := p.cells(raw, p.methods[i], c, n*c.width)
			if err == nil && int64(len(cells)) != n*c.width {
				err = fmt.Errorf("%d bytes for %d rows", len(cells), n)
			}
			if err != nil {
				return nil, fault(ErrBadData, p.raw.index, hintCopy, "tile %d of the compressed table cannot be unpacked: %v", tile+1, err).at(c.name, int(first))
			}
			for r := range n {
				copy(out[(first+r)*rowLen+c.offset:], cells[r*c.width:(r+1)*c.width])
			}
		}
	}
	return out, nil
}

// cells unpacks one column of one tile to its size bytes.
func (p *packed) cells(raw []byte, method string, c *column, size int64) ([]byte, error) {
	element := elementSize[c.code]
	switch method {
	case "GZIP_1", "GZIP_2":
		out, err := inflate(raw, size)
		if err == nil && method == "GZIP_2" && element > 1 && int64(len(out))%element == 0 {
			out = unshuffle(out, element)
		}
		return out, err
	case "RICE_1":
		v := make([]float64, size/element)
		if err := unrice(v, raw, int(element), 32); err != nil {
			return nil, err
		}
		out := make([]byte, 0, size)
		for _, x := range v {
			switch element {
			case 1:
				out = append(out, byte(x))
			case 2:
				out = binary.BigEndian.AppendUint16(out, uint16(int16(x)))
			default:
				out = binary.BigEndian.AppendUint32(out, uint32(int32(x)))
			}
		}
		return out, nil
	}
	return raw, nil
}

// unshuffle puts the bytes of GZIP_2 back in their places: the most significant
// ones of all elements come first.
func unshuffle(raw []byte, size int64) []byte {
	n := int64(len(raw)) / size
	plain := make([]byte, len(raw))
	for b := range size {
		for i := range n {
			plain[i*size+b] = raw[b*n+i]
		}
	}
	return plain
}

// packedBytes is readBytes for a compressed table.
func (f *File) packedBytes(h *hdu, from, n int64) ([]byte, error) {
	rec, _ := f.src.ReaderAt.(*recording)
	table, err := h.packed.unpack(f)
	switch {
	case err == nil:
	case rec != nil && rec.failed == nil && !ours(err):
		rec.failed = err
		return nil, err
	default:
		return nil, err
	}
	buf := append([]byte(nil), table[from:from+n]...)
	if rec != nil {
		writePiece(rec.sum, buf)
	}
	return buf, nil
}
