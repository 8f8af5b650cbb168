package fitsout

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strconv"
	"strings"
)

// ErrOrder is wrapped by errors about calls out of order: an extension without
// a primary HDU, an HDU while a table is open.
var ErrOrder = errors.New("FITS HDU order")

// bufferBlocks is how many 2880-byte blocks are gathered before a write.
const bufferBlocks = 32

// Writer writes one FITS file. It must be used by one goroutine at a time.
type Writer struct {
	out  io.WriteSeeker
	end  int64 // where the next HDU begins
	hdus int
	open *hdu
	err  error
}

// NewWriter returns a Writer that begins at the current position of out. The
// header of an HDU is written twice: out must be able to seek back over it.
func NewWriter(out io.WriteSeeker) (*Writer, error) {
	pos, err := out.Seek(0, io.SeekCurrent)
	if err != nil {
		return nil, fmt.Errorf("FITS output must be able to seek: %w", err)
	}
	return &Writer{out: out, end: pos}, nil
}

// Empty writes a primary HDU without data.
func (w *Writer) Empty(h *Header) error {
	u, err := w.begin(structure{bitpix: 8}, h)
	if err != nil {
		return err
	}
	return u.finish()
}

// Close says that the file is complete: it returns an error if a table is
// still open, if there is no HDU, or if anything failed before. It does not
// close the underlying file.
func (w *Writer) Close() error {
	switch {
	case w.err != nil:
		return w.err
	case w.open != nil:
		return w.fail(fmt.Errorf("%w: a table is still open", ErrOrder))
	case w.hdus == 0:
		return w.fail(fmt.Errorf("%w: no HDU was written", ErrOrder))
	}
	w.err = errors.New("FITS output is closed")
	return nil
}

func (w *Writer) fail(err error) error {
	if w.err == nil {
		w.err = err
	}
	return err
}

// structure is what the mandatory keywords say.
type structure struct {
	bitpix int
	axes   []int64
	name   string
	table  bool
	fields int
	cards  []string // column keywords of a table
}

// hdu is one HDU being written.
type hdu struct {
	w      *Writer
	start  int64
	shape  structure
	extra  []string
	first  bool
	size   int // of the header in bytes
	sum    checksum
	buf    []byte
	length int64 // data bytes so far
}

// begin writes the header with its checksums still open and leaves the
// position at the data.
func (w *Writer) begin(s structure, h *Header) (*hdu, error) {
	first := w.hdus == 0
	switch {
	case w.err != nil:
		return nil, w.err
	case w.open != nil:
		return nil, w.fail(fmt.Errorf("%w: the table before %q is still open", ErrOrder, s.name))
	case s.table && first:
		return nil, w.fail(fmt.Errorf("%w: a table cannot be the first HDU; call Empty before it", ErrOrder))
	case !first && s.axes == nil && !s.table:
		return nil, w.fail(fmt.Errorf("%w: only the primary HDU can be written by Empty", ErrOrder))
	}
	if err := h.err(); err != nil {
		return nil, w.fail(err)
	}
	if i := badByte(s.name); i >= 0 || len(s.name) > maxString {
		return nil, w.fail(fmt.Errorf("%w: EXTNAME %q: want at most %d characters of printable ASCII", ErrHeader, s.name, maxString))
	}
	u := &hdu{w: w, start: w.end, shape: s, extra: h.records(), first: first}
	if s.axes != nil {
		u.buf = make([]byte, 0, bufferBlocks*blockSize)
	}
	header := u.header("0", strings.Repeat("0", 16))
	u.size = len(header)
	if _, err := w.out.Write(header); err != nil {
		return nil, w.fail(fmt.Errorf("writing FITS header %q: %w", s.name, err))
	}
	w.hdus++
	w.open = u
	return u, nil
}

// header lays out all records. Its size depends only on their number, never on
// the values that are filled in at the end.
func (u *hdu) header(datasum, check string) []byte {
	s := &u.shape
	var cards []string
	add := func(card string) { cards = append(cards, card) }
	number := func(key string, v int64, comment string) { add(fixedCard(key, strconv.FormatInt(v, 10), comment)) }
	switch {
	case u.first:
		add(fixedCard("SIMPLE", "T", "conforms to the FITS standard"))
	case s.table:
		cards = append(cards, textCards("XTENSION", "BINTABLE", "binary table")...)
	default:
		cards = append(cards, textCards("XTENSION", "IMAGE", "image")...)
	}
	number("BITPIX", int64(s.bitpix), "bits of a data value")
	number("NAXIS", int64(len(s.axes)), "number of axes")
	for i, n := range s.axes {
		comment := ""
		if s.table {
			comment = [...]string{"bytes of a row", "rows"}[i]
		}
		number(fmt.Sprintf("NAXIS%d", i+1), n, comment)
	}
	if u.first {
		add(fixedCard("EXTEND", "T", "extensions may follow"))
	} else {
		number("PCOUNT", 0, "no bytes after the data")
		number("GCOUNT", 1, "one group")
	}
	if s.table {
		number("TFIELDS", int64(s.fields), "columns")
	}
	if s.name != "" {
		cards = append(cards, textCards("EXTNAME", s.name, "")...)
	}
	if continued(s.cards) || continued(u.extra) {
		// Not asked for by the standard, but readers older than version 4.0
		// expect it.
		cards = append(cards, textCards("LONGSTRN", "OGIP 1.0", "long strings go on in CONTINUE")...)
	}
	cards = append(cards, s.cards...)
	cards = append(cards, u.extra...)
	cards = append(cards, textCards("DATASUM", datasum, "sum of the data")...)
	cards = append(cards, textCards("CHECKSUM", check, "complement of the sum of the HDU")...)
	add(pad("END"))
	size := (len(cards)*cardSize + blockSize - 1) / blockSize * blockSize
	out := make([]byte, 0, size)
	for _, card := range cards {
		out = append(out, card...)
	}
	for len(out) < size {
		out = append(out, ' ')
	}
	return out
}

func continued(cards []string) bool {
	return slices.ContainsFunc(cards, func(c string) bool { return strings.HasPrefix(c, "CONTINUE  ") })
}

// write adds data bytes.
func (u *hdu) write(p []byte) error {
	u.length += int64(len(p))
	for len(p) > 0 {
		n := copy(u.buf[len(u.buf):cap(u.buf)], p)
		u.buf, p = u.buf[:len(u.buf)+n], p[n:]
		if len(u.buf) == cap(u.buf) {
			if err := u.flush(); err != nil {
				return err
			}
		}
	}
	return nil
}

// flush writes whole blocks.
func (u *hdu) flush() error {
	u.sum = u.sum.add(u.buf)
	if _, err := u.w.out.Write(u.buf); err != nil {
		return u.w.fail(fmt.Errorf("writing FITS data %q: %w", u.shape.name, err))
	}
	u.buf = u.buf[:0]
	return nil
}

// finish pads the data and writes the header again with what is now known.
func (u *hdu) finish() error {
	w := u.w
	if w.err != nil {
		return w.err
	}
	for len(u.buf)%blockSize != 0 {
		u.buf = append(u.buf, 0)
	}
	if len(u.buf) > 0 {
		if err := u.flush(); err != nil {
			return err
		}
	}
	datasum := strconv.FormatUint(uint64(u.sum), 10)
	total := u.sum.plus(checksum(0).add(u.header(datasum, strings.Repeat("0", 16))))
	header := u.header(datasum, total.encode())
	padded := (u.length + blockSize - 1) / blockSize * blockSize
	if _, err := w.out.Seek(u.start, io.SeekStart); err != nil {
		return w.fail(fmt.Errorf("going back to FITS header %q: %w", u.shape.name, err))
	}
	if _, err := w.out.Write(header); err != nil {
		return w.fail(fmt.Errorf("writing FITS header %q: %w", u.shape.name, err))
	}
	w.end = u.start + int64(u.size) + padded
	if _, err := w.out.Seek(w.end, io.SeekStart); err != nil {
		return w.fail(fmt.Errorf("going to the end of FITS HDU %q: %w", u.shape.name, err))
	}
	w.open = nil
	return nil
}
