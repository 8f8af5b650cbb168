package fitsread

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"io/fs"
)

// The digest of a spectrum is of what it was made from, as it was read: all
// headers of the file, what was read to choose the layout, the layout, and the
// bytes that were read for this spectrum, which are its rows and lines of every
// HDU in use and the arrays that it shares with others. Reading is a function
// of these and nothing else. So equal digests mean equal spectra, wherever the
// arrays stand and however they are packed; a row that changes has another
// digest and its neighbors have not; and no byte is read for the digest alone.

// recording is a source that digests what is read from it, in order, each piece
// with its length, and keeps the first failure of the disk. It is for one goroutine.
type recording struct {
	io.ReaderAt
	sum    hash.Hash
	failed error
}

func (r *recording) ReadAt(b []byte, off int64) (int, error) {
	n, err := r.ReaderAt.ReadAt(b, off)
	writePiece(r.sum, b[:n])
	if err != nil && err != io.EOF && r.failed == nil {
		r.failed = err
	}
	return n, err
}

// heard returns err, or the failure of the disk where it came to nothing or was
// taken for a fault of the file: names and the like do without what cannot be read,
// and that must not pass for a file without them.
func (r *recording) heard(err error) error {
	if r.failed == nil || errors.Is(err, r.failed) {
		return err
	}
	return fault(r.failed, -1, "check the disk or the network", "it cannot be read any more: %v", r.failed)
}

func writePiece(sum hash.Hash, b []byte) {
	var length [8]byte
	binary.BigEndian.PutUint64(length[:], uint64(len(b)))
	sum.Write(length[:])
	sum.Write(b)
}

// recorded returns the same file and what hears all that is read through it.
func (f *File) recorded() (*File, *recording) {
	src, heard := *f.src, *f
	rec := &recording{ReaderAt: src.ReaderAt, sum: sha256.New()}
	src.ReaderAt = rec
	heard.src = &src
	return &heard, rec
}

// checksumCards follow from the data (FITS standard 4.0, sections 4.4.2.7 and
// 10.1.2): a row that changes would change the digests of all others by them.
var checksumCards = map[string]bool{"CHECKSUM": true, "DATASUM": true, "ZHECKSUM": true, "ZDATASUM": true}

// baseDigest digests the headers, what was read to choose the layout, and the
// layout.
func (f *File) baseDigest(chosen hash.Hash) (out [sha256.Size]byte) {
	sum := sha256.New()
	for _, h := range f.hdus {
		fmt.Fprintf(sum, "HDU %d %d\n", h.missing, len(h.header))
		for _, c := range h.header {
			if !checksumCards[c.key] {
				writePiece(sum, []byte(c.key))
				writePiece(sum, []byte(c.rest))
				writePiece(sum, []byte(c.long))
			}
		}
	}
	sum.Write(chosen.Sum(nil))
	writePiece(sum, []byte(f.plan.layout))
	writePiece(sum, []byte(f.plan.digest))
	sum.Sum(out[:0])
	return out
}

// finish returns the digest of spectrum i for which sum was read.
func (f *File) finish(read hash.Hash, i int) string {
	sum := sha256.New()
	sum.Write(f.base[:])
	fmt.Fprintf(sum, "%d\n", i)
	sum.Write(read.Sum(nil))
	return hex.EncodeToString(sum.Sum(nil)[:8])
}

// Digest identifies what spectrum i is made from: the first 16 hexadecimal
// digits of a SHA-256 over all headers of the file but their checksum cards, the
// layout, the row, and the bytes that reading it takes (unpacked where the file
// was gzipped). A spectrum has it in its InputDigest; this is for those that
// cannot be read, whose reading breaks off at the same byte every time. The
// error is that of a file that changed or cannot be read at all.
//
// Panics if i is not below Count.
func (f *File) Digest(i int) (string, error) {
	heard, rec := f.recorded()
	_, err := heard.readAs(i, Nobody())
	err = named(rec.heard(err), f.path)
	var disk *fs.PathError
	if errors.Is(err, ErrChanged) || errors.As(err, &disk) || rec.failed != nil {
		return "", err
	}
	return f.finish(rec.sum, i), nil
}
