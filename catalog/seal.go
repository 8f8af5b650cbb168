package catalog

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
)

// A Parquet file guards its pages by CRC but neither its footer nor the page
// headers, and a decoder that follows a damaged one can ask for any amount of
// memory. So the metadata of our files holds a seal: the first 16 hexadecimal
// digits of the SHA-256 of the whole file, taken with zeros in their place. It
// is checked before anything is decoded. Other readers see one more entry of
// metadata.
const (
	sealKey   = "seal"
	sealValue = "seal=0000000000000000"
	sealSize  = 16
	// tailSize is the footer's length and the magic bytes at the file's end.
	tailSize = 8
)

// sealMark is how the entry looks in the footer (Thrift compact protocol: two
// binary fields with their lengths), up to the digits.
var sealMark = []byte("\x18\x04seal\x18\x15seal=")

// sealer passes bytes on until hold is called, then keeps the footer back.
type sealer struct {
	out    io.Writer
	sum    hash.Hash
	footer []byte
	held   bool
}

func newSealer(out io.Writer) *sealer {
	return &sealer{out: out, sum: sha256.New()}
}

func (s *sealer) Write(p []byte) (int, error) {
	if s.held {
		s.footer = append(s.footer, p...)
		return len(p), nil
	}
	n, err := s.out.Write(p)
	s.sum.Write(p[:n])
	return n, err
}

// hold says that all row groups are written.
func (s *sealer) hold() { s.held = true }

// finish puts the seal into the footer and writes it.
func (s *sealer) finish() error {
	length, err := footerSize(s.footer, int64(len(s.footer)))
	if err != nil {
		return err
	}
	footer := s.footer[int64(len(s.footer))-length:]
	at, err := findSeal(footer)
	if err != nil {
		return err
	}
	s.sum.Write(s.footer)
	copy(footer[at:], digits(s.sum))
	_, err = s.out.Write(s.footer)
	return err
}

func digits(h hash.Hash) string { return hex.EncodeToString(h.Sum(nil))[:sealSize] }

var errNoFooter = errors.New("no footer at the end: cut short or not Parquet")

// footerSize returns the size of the footer with its tail, given the end of a
// file of size bytes.
func footerSize(end []byte, size int64) (int64, error) {
	tail := end[len(end)-tailSize:]
	length := int64(binary.LittleEndian.Uint32(tail)) + tailSize
	if string(tail[4:]) != "PAR1" || length > size {
		return 0, errNoFooter
	}
	return length, nil
}

// findSeal returns the position of the digits in a footer.
func findSeal(footer []byte) (int, error) {
	at := bytes.Index(footer, sealMark)
	if at < 0 || at+len(sealMark)+sealSize > len(footer) {
		return 0, errors.New("no seal in the metadata: not a file of ours, or damaged")
	}
	return at + len(sealMark), nil
}

// checkSeal reads a file once and returns an error unless its bytes are those
// that were sealed.
func checkSeal(r io.ReaderAt, size int64) error {
	var tail [tailSize]byte
	if size < tailSize {
		return errNoFooter
	}
	if _, err := r.ReadAt(tail[:], size-tailSize); err != nil && err != io.EOF {
		return err
	}
	length, err := footerSize(tail[:], size)
	if err != nil {
		return err
	}
	footer := make([]byte, length)
	if _, err := r.ReadAt(footer, size-length); err != nil && err != io.EOF {
		return err
	}
	at, err := findSeal(footer)
	if err != nil {
		return err
	}
	sealed := string(footer[at : at+sealSize])
	copy(footer[at:], sealValue[len(sealValue)-sealSize:])
	h := sha256.New()
	if _, err := io.Copy(h, io.NewSectionReader(r, 0, size-length)); err != nil {
		return err
	}
	h.Write(footer)
	if got := digits(h); got != sealed {
		return fmt.Errorf("damaged: the bytes have the digest %s, sealed as %s", got, sealed)
	}
	return nil
}
