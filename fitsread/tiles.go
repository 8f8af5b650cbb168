package fitsread

import (
	"fmt"
	"math"
	"strings"
)

// tiles describes a tile-compressed image (FITS standard 4.0, section 10): a
// table with a compressed tile of the image a row.
type tiles struct {
	method    string  // ZCMPTYPE
	axes      []int64 // ZNAXISn
	size      []int64 // ZTILEn
	counts    []int64 // tiles along each axis
	rows      int64   // of the table, a tile each
	rowLen    int64
	pixelSize int64 // bytes of a pixel by ZBITPIX
	isFloat   bool
	block     int // BLOCKSIZE of Rice coding
	bytePix   int // BYTEPIX of Rice coding
	data      *column
	gzipData  *column // GZIP_COMPRESSED_DATA, may be nil
	plainData *column // UNCOMPRESSED_DATA, may be nil
	scaleCol  *column // ZSCALE; nil where pixels are not quantized or the card has it
	zeroCol   *column // ZZERO
	quantized bool
	scale     float64 // ZSCALE and ZZERO of all tiles where no column has them
	zero      float64
	blank     int64 // of quantized pixels
	hasBlank  bool
	blankCol  *column
	dither    int // 0, 1 or 2: SUBTRACTIVE_DITHER_n
	seed      int64
}

// unpackHint is what people do with what is not unpacked here.
const unpackHint = "unpack it first with: funpack -O unpacked.fits FILE"

// maxTilePixels bounds one tile, and compressionLimit the pixels that a byte of
// compressed data may claim: deflate reaches 1032 bytes and PLIO 2048 pixels.
const (
	maxTilePixels    = 1 << 26
	compressionLimit = 2100
)

// readTiles turns a compressed image into an image whose lines are unpacked when
// they are read. It leaves h as it was, with the reason in h.broken, when the
// description contradicts itself or the method is not one of those known here.
func (h *hdu) readTiles() {
	h.kind = kindTable
	h.readColumns()
	h.kind = kindCompressed
	columns := h.columns
	h.columns = nil
	if h.broken != nil {
		return
	}
	t := &tiles{method: strings.ToUpper(h.header.text("ZCMPTYPE")), rowLen: h.axes[0], rows: h.axes[1], block: 32, bytePix: 4}
	axes, bitpix, bad := t.readCards(h)
	if bad == "" {
		bad = t.readColumnRoles(h, columns, bitpix)
	}
	if bad == "" {
		bad = t.checkSizes(h, axes)
	}
	switch {
	case bad != "":
		h.broken = fault(ErrBadHeader, h.index, hintCopy, "the compressed image is not described right: %s", bad)
		return
	case t.method != "RICE_1" && t.method != "RICE_ONE" && t.method != "GZIP_1" && t.method != "GZIP_2" && t.method != "PLIO_1" && t.method != "NOCOMPRESS":
		return // stays kindCompressed and is refused by name where it is needed
	}
	t.axes = axes
	h.kind, h.tiles, h.axes, h.bitpix = kindImage, t, axes, bitpix
}

func (t *tiles) readCards(h *hdu) (axes []int64, bitpix int, bad string) {
	hd := h.header
	bitpixCard, ok := hd.integer("ZBITPIX")
	if !ok || elementSize[imageCode[int(bitpixCard)]] == 0 {
		return nil, 0, "ZBITPIX is missing or no BITPIX"
	}
	naxis, ok := hd.integer("ZNAXIS")
	if !ok || naxis < 1 || naxis > 16 {
		return nil, 0, "ZNAXIS is missing or not from 1 to 16"
	}
	for i := int64(1); i <= naxis; i++ {
		n, ok := hd.integer(fmt.Sprintf("ZNAXIS%d", i))
		if !ok || n < 1 || n > math.MaxInt32 {
			return nil, 0, fmt.Sprintf("ZNAXIS%d is missing or no size", i)
		}
		size, ok := hd.integer(fmt.Sprintf("ZTILE%d", i))
		if !ok {
			if size = 1; i == 1 {
				size = n // the standard's default: a tile a line
			}
		}
		if size < 1 {
			return nil, 0, fmt.Sprintf("ZTILE%d is no size", i)
		}
		size = min(size, n)
		axes, t.size = append(axes, n), append(t.size, size)
		t.counts = append(t.counts, (n+size-1)/size)
	}
	for i := 1; i <= 9; i++ {
		v, ok := hd.integer(fmt.Sprintf("ZVAL%d", i))
		switch name := hd.text(fmt.Sprintf("ZNAME%d", i)); {
		case name == "":
		case strings.EqualFold(name, "BLOCKSIZE"):
			if !ok || v < 1 || v > 1024 {
				return nil, 0, "BLOCKSIZE is not from 1 to 1024"
			}
			t.block = int(v)
		case strings.EqualFold(name, "BYTEPIX"):
			if !ok || v != 1 && v != 2 && v != 4 {
				return nil, 0, "BYTEPIX is not 1, 2 or 4"
			}
			t.bytePix = int(v)
		}
	}
	switch strings.ToUpper(hd.text("ZQUANTIZ")) {
	case "SUBTRACTIVE_DITHER_1":
		t.dither = 1
	case "SUBTRACTIVE_DITHER_2":
		t.dither = 2
	}
	if t.seed, ok = hd.integer("ZDITHER0"); t.dither > 0 && (!ok || t.seed < 1 || t.seed > ditherLen) {
		return nil, 0, "ZDITHER0 is missing or not from 1 to 10000"
	}
	t.pixelSize, t.isFloat = int64(abs(int(bitpixCard)))/8, bitpixCard < 0
	return axes, int(bitpixCard), ""
}

// readColumnRoles finds the columns of the data and of their scaling.
func (t *tiles) readColumnRoles(h *hdu, columns []column, bitpix int) (bad string) {
	for i := range columns {
		c := &columns[i]
		switch strings.ToUpper(c.name) {
		case "COMPRESSED_DATA":
			t.data = c
		case "GZIP_COMPRESSED_DATA":
			t.gzipData = c
		case "UNCOMPRESSED_DATA":
			t.plainData = c
		case "ZSCALE":
			t.scaleCol = c
		case "ZZERO":
			t.zeroCol = c
		case "ZBLANK":
			t.blankCol = c
		}
	}
	for _, c := range []*column{t.data, t.gzipData, t.plainData} {
		if c != nil && (c.heap == 0 || c.repeat == 0) {
			return fmt.Sprintf("column %s holds no arrays", c.name)
		}
	}
	for _, c := range []*column{t.scaleCol, t.zeroCol, t.blankCol} {
		if c != nil && (!c.numeric() || c.isVector()) {
			return fmt.Sprintf("column %s holds no numbers", c.name)
		}
	}
	if t.data == nil && t.plainData == nil {
		return "it has no column COMPRESSED_DATA"
	}
	scale, hasScale := h.header.number("ZSCALE")
	t.zero, _ = h.header.number("ZZERO")
	t.scale = 1
	if hasScale {
		t.scale = scale
	}
	if t.blank, t.hasBlank = h.header.integer("ZBLANK"); !t.hasBlank && bitpix > 0 {
		t.blank, t.hasBlank = h.header.integer("BLANK")
	}
	t.quantized = bitpix < 0 && (t.scaleCol != nil || hasScale)
	if bitpix < 0 && !t.quantized && (strings.HasPrefix(t.method, "RICE") || t.method == "PLIO_1") {
		return fmt.Sprintf("%s needs whole numbers, and there is no ZSCALE", t.method)
	}
	return ""
}

// checkSizes holds what the cards claim against the table and the file.
func (t *tiles) checkSizes(h *hdu, axes []int64) (bad string) {
	n, perTile, pixels := int64(1), int64(1), int64(1)
	for i := range axes {
		n, perTile = n*t.counts[i], perTile*t.size[i]
		if pixels *= axes[i]; n > math.MaxInt32 || perTile > maxTilePixels || pixels > math.MaxInt64>>32 {
			return "the tiles are too many or too large"
		}
	}
	if n != t.rows {
		return fmt.Sprintf("it has %d tiles and the table %d rows", n, t.rows)
	}
	if have := h.length - h.missing; pixels/compressionLimit > have {
		return fmt.Sprintf("%d pixels cannot come out of %d bytes", pixels, have)
	}
	return ""
}

// tilePixels returns n pixels of a compressed image from pixel first on, not yet
// scaled by BSCALE and BZERO; blank ones are NaN. Each tile is unpacked once a call.
func (f *File) tilePixels(h *hdu, first, n int64) ([]float64, error) {
	t := h.tiles
	perTile := int64(1)
	for _, s := range t.size {
		perTile *= s
	}
	if err := f.checkPixels(h, perTile); err != nil {
		return nil, err
	}
	out := make([]float64, n)
	unpacked := map[int64][]float64{}
	width := t.axes[0]
	coord := make([]int64, len(t.axes))
	var lastBand int64 = -1
	for p := first; p < first+n; {
		x, rest := p%width, p/width
		coord[0] = x
		for i := 1; i < len(t.axes); i++ {
			coord[i], rest = rest%t.axes[i], rest/t.axes[i]
		}
		// Number of the tile, and place of the pixel in it. Tiles at the far edge
		// of an axis are smaller.
		number, tilePitch, at, pitch := int64(0), int64(1), int64(0), int64(1)
		band := int64(0)
		for i, c := range coord {
			k := c / t.size[i]
			number += k * tilePitch
			if i > 0 {
				band += k * tilePitch
			}
			tilePitch *= t.counts[i]
			at += (c - k*t.size[i]) * pitch
			pitch *= min(t.size[i], t.axes[i]-k*t.size[i])
		}
		if band != lastBand { // lines come in order: tiles passed are not needed again
			clear(unpacked)
			lastBand = band
		}
		tile := unpacked[number]
		if tile == nil {
			var err error
			if tile, err = f.tile(h, number, pitch); err != nil {
				return nil, err
			}
			unpacked[number] = tile
		}
		run := min(t.size[0]-x%t.size[0], width-x, first+n-p)
		copy(out[p-first:p-first+run], tile[at:at+run])
		p += run
	}
	return out, nil
}

// tile unpacks one tile of n pixels.
func (f *File) tile(h *hdu, number, n int64) ([]float64, error) {
	t := h.tiles
	fail := func(err error) error {
		return fault(ErrBadData, h.index, hintCopy, "tile %d of the compressed image cannot be unpacked: %v", number+1, err)
	}
	out := make([]float64, n)
	var raw []byte
	var err error
	stored := int64(0)
	if t.data != nil {
		if raw, stored, err = f.heapBytes(h, t.data, number, t.rowLen, t.rows); err != nil {
			return nil, err
		}
	}
	switch {
	case stored > 0:
		if err := t.decode(out, raw); err != nil {
			return nil, fail(err)
		}
		if t.quantized {
			if err := f.dequantize(h, out, number); err != nil {
				return nil, err
			}
		} else if t.hasBlank && h.bitpix > 0 {
			for i, v := range out {
				if v == float64(t.blank) {
					out[i] = math.NaN()
				}
			}
		}
		return out, nil
	case t.gzipData != nil:
		if raw, stored, err = f.heapBytes(h, t.gzipData, number, t.rowLen, t.rows); err != nil {
			return nil, err
		}
		if stored > 0 {
			if raw, err = inflate(raw, n*t.pixelSize); err != nil {
				return nil, fail(err)
			}
		}
	}
	if stored == 0 && t.plainData != nil {
		if raw, stored, err = f.heapBytes(h, t.plainData, number, t.rowLen, t.rows); err != nil {
			return nil, err
		}
	}
	if stored == 0 || int64(len(raw)) != n*t.pixelSize {
		return nil, fail(fmt.Errorf("%d bytes for %d pixels", len(raw), n))
	}
	c := column{scale: 1, code: imageCode[h.bitpix]}
	c.decode(out, raw)
	return out, nil
}

// dequantize turns whole numbers back into floating-point pixels: scale i + zero,
// or scale (i - r + 0.5) + zero with the pseudo-random r that dithering added
// (FITS standard 4.0, section 10.2).
func (f *File) dequantize(h *hdu, v []float64, number int64) error {
	t := h.tiles
	scale, zero, blank, hasBlank := t.scale, t.zero, float64(t.blank), t.hasBlank
	for _, s := range []struct {
		c  *column
		to *float64
	}{{t.scaleCol, &scale}, {t.zeroCol, &zero}, {t.blankCol, &blank}} {
		if s.c == nil {
			continue
		}
		raw, err := f.readBytes(h, number*t.rowLen+s.c.offset, s.c.width)
		if err != nil {
			return err
		}
		var x [1]float64
		s.c.decode(x[:], raw)
		*s.to = x[0]
		hasBlank = hasBlank || s.c == t.blankCol
	}
	random := ditherSequence()
	start, next := 0, 0
	if t.dither > 0 {
		start = int((number + t.seed - 1) % ditherLen)
		next = int(random[start] * 500)
	}
	for i, q := range v {
		r := 0.5
		if t.dither > 0 {
			r = float64(random[next])
			if next++; next == ditherLen {
				start = (start + 1) % ditherLen
				next = int(random[start] * 500)
			}
		}
		switch {
		case hasBlank && q == blank:
			v[i] = math.NaN()
		case t.dither == 2 && q == ditherZero:
			v[i] = 0
		default:
			v[i] = (q-r+0.5)*scale + zero
		}
		if h.bitpix == -32 {
			v[i] = float64(float32(v[i]))
		}
	}
	return nil
}
