package fitsread

import (
	"errors"
	"io"
	"math"
	"strings"
)

type kind int

const (
	kindImage kind = iota
	kindTable
	kindASCII
	kindCompressed // image in tiles whose method is not known here
	kindPacked     // table in tiles that is not unpacked here
	kindOther
)

func (k kind) String() string {
	return [...]string{"image", "table", "text table", "compressed image", "compressed table", "other"}[k]
}

// hdu is one header-data unit whose sizes were checked against the file.
type hdu struct {
	index   int
	kind    kind
	name    string // EXTNAME
	header  header
	bitpix  int
	axes    []int64 // NAXISn, without those of one pixel before the only longer one of an image
	first   int     // number of the axis in the header that axes[0] is, from 1
	turned  bool    // the image's lines run along its second axis
	offset  int64   // of the data
	length  int64   // of the data without padding, as the header claims
	missing int64   // bytes of the data that the file does not have
	columns []column
	broken  *ReadError // why a table must not be used, nil when it may
	tiles   *tiles     // of a compressed image, nil for others
	packed  *packed    // of a compressed table, nil for others
}

// pixels returns the number of pixels of an image line, 0 for no image.
func (h *hdu) pixels() int64 {
	switch {
	case h.kind != kindImage || len(h.axes) == 0:
		return 0
	case h.turned:
		return h.axes[1]
	}
	return h.axes[0]
}

// lines returns how many lines of pixels() pixels an image has; a table's rows.
func (h *hdu) lines() int64 {
	switch {
	case h.kind == kindTable || h.kind == kindASCII:
		return h.axes[1]
	case h.kind != kindImage || len(h.axes) == 0:
		return 0
	}
	if h.turned {
		return h.axes[0]
	}
	n := int64(1)
	for _, a := range h.axes[1:] {
		n *= a
	}
	return n
}

// dropThinAxes takes away axes of one pixel before the only longer one: a spectrum
// is often written along the third axis of a cube of 1 x 1 x n pixels.
func (h *hdu) dropThinAxes() {
	h.first = 1
	long := 0
	for _, a := range h.axes {
		if a != 1 {
			long++
		}
	}
	for h.kind == kindImage && long == 1 && h.axes[0] == 1 {
		h.axes = h.axes[1:]
		h.first++
	}
}

// Bounds on headers. No survey comes near them; a file that lies does.
const (
	maxHeaderBytes = 8 << 20
	maxAllHeaders  = 64 << 20
	maxHDUs        = 10000
	maxFields      = 999 // FITS standard 4.0, section 7.3.1
)

// walk reads the headers of all HDUs and checks every size that they claim
// against the file, before anything is allocated by it. A file that breaks off
// inside an HDU is walked up to there; the HDU knows how much is missing.
func walk(src io.ReaderAt, size int64) ([]*hdu, error) {
	var hdus []*hdu
	var headerBytes int64
	for off := int64(0); off < size && len(hdus) < maxHDUs; {
		text, err := readHeader(src, off, size)
		if err != nil || text == "" {
			if len(hdus) > 0 && err == nil {
				break // special records after the last HDU
			}
			if re, ok := err.(*ReadError); ok {
				re.HDU = len(hdus)
			}
			// A later header that breaks off takes nothing from earlier HDUs; one that the
			// disk does not give might be any.
			if len(hdus) > 0 && (errors.Is(err, ErrTruncated) || errors.Is(err, ErrBadHeader)) {
				hdus = append(hdus, &hdu{index: len(hdus), kind: kindOther, missing: 1})
				break
			}
			return nil, err
		}
		headerBytes += int64(len(text))
		if headerBytes > maxAllHeaders {
			return nil, fault(ErrTooLarge, len(hdus), "split the file", "the headers take more than %d MB", maxAllHeaders>>20)
		}
		h := &hdu{index: len(hdus), header: parseHeader(text), offset: off + int64(len(text))}
		if err := h.structure(); err != nil {
			if h.index == 0 {
				return nil, err
			}
			h.kind, h.broken = kindOther, err
			hdus = append(hdus, h)
			break // where the next HDU begins is not known
		}
		if end := h.offset + h.length; end > size {
			h.missing = end - size
		}
		hdus = append(hdus, h)
		off = h.offset + (h.length+blockLen-1)/blockLen*blockLen
	}
	if len(hdus) == 0 {
		return nil, fault(ErrNotFITS, -1, "remove it from the input or fetch it again", "the file is empty")
	}
	return hdus, nil
}

// readHeader returns the blocks of the header that begins at off, "" when no
// HDU begins there.
func readHeader(src io.ReaderAt, off, size int64) (string, error) {
	var text []byte
	chunk := int64(8 * blockLen)
	for {
		n := min(chunk, size-off-int64(len(text)))
		if n <= 0 {
			return "", fault(ErrTruncated, 0, hintCopy, "the header has no END card before the file ends")
		}
		start := len(text)
		text = append(text, make([]byte, n)...)
		if _, err := src.ReadAt(text[start:], off+int64(start)); err != nil && err != io.EOF {
			return "", fault(err, 0, hintCopy, "the header cannot be read: %v", err)
		}
		if start == 0 {
			first := string(text[:min(len(text), 9)])
			if off == 0 && !strings.HasPrefix(first, "SIMPLE  =") {
				return "", notFITS(text)
			}
			if off > 0 && !strings.HasPrefix(first, "XTENSION") {
				return "", nil
			}
		}
		for i := start / blockLen * blockLen; i+cardLen <= len(text); i += cardLen {
			if text[i] == 'E' && strings.TrimRight(string(text[i:i+cardLen]), " ") == "END" {
				end := (i/blockLen + 1) * blockLen
				if end > len(text) {
					return "", fault(ErrTruncated, 0, hintCopy, "the file ends inside a header block")
				}
				return string(text[:end]), nil
			}
		}
		if len(text) > maxHeaderBytes {
			return "", fault(ErrBadHeader, 0, hintCopy, "the header has no END card within %d MB", maxHeaderBytes>>20)
		}
		chunk *= 2
	}
}

func notFITS(start []byte) *ReadError {
	msg := "it does not begin with SIMPLE as FITS files do"
	for _, c := range start[:min(len(start), 64)] {
		if c >= 0x80 || c == 0 {
			return fault(ErrNotFITS, -1, "check what it is", "%s", msg)
		}
	}
	return fault(ErrNotFITS, -1, "convert text spectra to a FITS table first", "%s; it looks like text", msg)
}

// structure reads and checks the cards that say how long the data are.
func (h *hdu) structure() *ReadError {
	hd := h.header
	h.name = hd.text("EXTNAME")
	bitpix, ok := hd.integer("BITPIX")
	switch {
	case !ok:
		return fault(ErrBadHeader, h.index, hintCopy, "BITPIX is missing or not a number")
	case bitpix != 8 && bitpix != 16 && bitpix != 32 && bitpix != 64 && bitpix != -32 && bitpix != -64:
		return fault(ErrBadHeader, h.index, hintCopy, "BITPIX = %d is not one of 8, 16, 32, 64, -32, -64", bitpix)
	}
	h.bitpix = int(bitpix)
	naxis, ok := hd.integer("NAXIS")
	if !ok || naxis < 0 || naxis > 999 {
		return fault(ErrBadHeader, h.index, hintCopy, "NAXIS is missing or not a number from 0 to 999")
	}
	h.axes = make([]int64, naxis)
	for _, c := range hd { // one pass: asking for 999 keys one by one is slow
		if stem, n := split(c.key); stem == "NAXIS" && n >= 1 && int64(n) <= naxis && h.axes[n-1] == 0 {
			v, ok := header{c}.integer(c.key)
			if !ok || v < 0 {
				return fault(ErrBadHeader, h.index, hintCopy, "%s = %q is not a size", c.key, c.value())
			}
			h.axes[n-1] = v + 1 // marks the card as seen
		}
	}
	for i := range h.axes {
		if h.axes[i]--; h.axes[i] < 0 {
			return fault(ErrBadHeader, h.index, hintCopy, "NAXIS%d is missing", i+1)
		}
	}
	pcount, gcount := int64(0), int64(1)
	if v, ok := hd.integer("PCOUNT"); ok {
		pcount = v
	}
	if v, ok := hd.integer("GCOUNT"); ok {
		gcount = v
	}
	if pcount < 0 || gcount < 0 {
		return fault(ErrBadHeader, h.index, hintCopy, "PCOUNT or GCOUNT is negative")
	}
	h.kind = h.classify()
	groups := h.index == 0 && naxis > 0 && h.axes[0] == 0
	if h.length, ok = dataLength(h.axes, int64(abs(h.bitpix))/8, pcount, gcount, groups); !ok {
		return fault(ErrBadHeader, h.index, hintCopy, "NAXISn and PCOUNT claim more bytes than a file can have")
	}
	switch h.kind {
	case kindTable, kindASCII:
		h.readColumns()
	case kindCompressed:
		h.readTiles()
	case kindPacked:
		h.readPacked()
	}
	h.dropThinAxes()
	return nil
}

func (h *hdu) classify() kind {
	if h.index == 0 {
		if g, _ := h.header.logical("GROUPS"); g {
			return kindOther
		}
		return kindImage
	}
	table := len(h.axes) == 2 && h.bitpix == 8
	switch h.header.text("XTENSION") {
	case "IMAGE", "IUEIMAGE":
		return kindImage
	case "BINTABLE", "A3DTABLE":
		z, _ := h.header.logical("ZIMAGE")
		if zt, _ := h.header.logical("ZTABLE"); table && zt {
			return kindPacked
		}
		if table && z {
			return kindCompressed
		}
		if table {
			return kindTable
		}
	case "TABLE":
		if table {
			return kindASCII
		}
	}
	return kindOther
}

// dataLength is |BITPIX|/8 x GCOUNT x (PCOUNT + NAXIS1 x NAXIS2 ...), FITS
// standard 4.0, equations 1 and 2; false where it overflows. Of random groups
// the first axis, zero, does not count.
func dataLength(axes []int64, size, pcount, gcount int64, groups bool) (int64, bool) {
	if len(axes) == 0 {
		return 0, true
	}
	if groups {
		axes = axes[1:]
	}
	n, ok := int64(1), true
	mul := func(a, b int64) int64 {
		if a != 0 && b > math.MaxInt64/4/a {
			ok = false
			return 0
		}
		return a * b
	}
	for _, a := range axes {
		n = mul(n, a)
	}
	if pcount > math.MaxInt64/4-n {
		return 0, false
	}
	n = mul(mul(n+pcount, gcount), size)
	return n, ok
}

func abs(n int) int {
	if n < 0 {
		return -n
	}
	return n
}

// need returns an error unless the bytes [from, from+n) of the data are there.
func (h *hdu) need(from, n int64) *ReadError {
	length := h.length
	if h.packed != nil {
		length = h.packed.size
	}
	switch {
	case h.broken != nil:
		return h.broken
	case h.packed != nil && h.missing > 0:
		return fault(ErrTruncated, h.index, hintCopy, "the file ends %d bytes before this HDU does", h.missing)
	case from < 0 || n < 0 || from > length-n:
		return fault(ErrBadHeader, h.index, hintCopy, "bytes %d to %d of the data are asked for, the header gives it %d", from, from+n, length)
	case from+n > length-h.missing:
		return fault(ErrTruncated, h.index, hintCopy, "the file ends %d bytes before this HDU does", h.missing)
	}
	return nil
}
