package pipeline

import (
	"bufio"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// names makes every object_id unique: one that came before gets a number after
// it, such as "x#2". First all IDs are added in order, then settle finds the
// repeated ones, then cursors give the new IDs, again in order.
//
// IDs are compared by hashes of eight bytes; two that share one are only told
// apart needlessly. The hashes lie in files, cut so that one of them fits in
// memory, whatever the number of objects. IDs that differ only in such numbers
// at their end share a file, so that a number given never meets an ID that ends
// in it already.
type names struct {
	folder   string
	parts    []*os.File // hashes, in order of the objects
	out      []*bufio.Writer
	repeats  []*os.File // objects to be renamed and their numbers, in order, a file a part
	objects  int64
	Repeated int64 // objects to be renamed
	longest  int32 // largest number given
}

// idsAPart bounds the memory of settle: about 40 bytes each.
const idsAPart = 500_000

// nameRecord is an object and the hash of its ID, or its number.
const nameRecord = 16

// newNames makes files in a folder, so many that one of objects IDs has about
// aPart of them.
func newNames(folder string, objects, aPart int64) (*names, error) {
	n := &names{folder: folder}
	for i := range int(objects/aPart) + 1 {
		f, err := os.Create(filepath.Join(folder, fmt.Sprintf("ids-%04d", i)))
		if err != nil {
			n.close()
			return nil, err
		}
		n.parts = append(n.parts, f)
		n.out = append(n.out, bufio.NewWriterSize(f, 1<<14))
	}
	return n, nil
}

// add takes the ID of the next object.
func (n *names) add(id string) error {
	base, full := hashID(id)
	var rec [nameRecord]byte
	binary.LittleEndian.PutUint64(rec[:], uint64(n.objects))
	binary.LittleEndian.PutUint64(rec[8:], full)
	n.objects++
	_, err := n.out[base%uint64(len(n.out))].Write(rec[:])
	return err
}

// settle finds out which objects must be renamed.
func (n *names) settle() error {
	for i, f := range n.parts {
		if err := n.out[i].Flush(); err != nil {
			return err
		}
		out, err := os.Create(filepath.Join(n.folder, fmt.Sprintf("repeats-%04d", i)))
		if err != nil {
			return err
		}
		n.repeats = append(n.repeats, out)
		if err := n.settlePart(f, out); err != nil {
			return err
		}
	}
	return nil
}

func (n *names) settlePart(in, out *os.File) error {
	if _, err := in.Seek(0, io.SeekStart); err != nil {
		return err
	}
	r, w := bufio.NewReaderSize(in, 1<<16), bufio.NewWriterSize(out, 1<<14)
	seen := map[uint64]int32{}
	for {
		var rec [nameRecord]byte
		if _, err := io.ReadFull(r, rec[:]); errors.Is(err, io.EOF) {
			return w.Flush()
		} else if err != nil {
			return err
		}
		number := giveNumber(seen, binary.LittleEndian.Uint64(rec[8:]))
		if number == 1 {
			continue
		}
		n.Repeated++
		n.longest = max(n.longest, number)
		binary.LittleEndian.PutUint64(rec[8:], uint64(number))
		if _, err := w.Write(rec[:]); err != nil {
			return err
		}
	}
}

// giveNumber returns 1 for an ID that is new and else the number to be put
// after it.
func giveNumber(seen map[uint64]int32, id uint64) int32 {
	seen[id]++
	if seen[id] == 1 {
		return 1
	}
	for {
		if other := numberedHash(id, seen[id]); seen[other] == 0 {
			seen[other] = 1
			return seen[id]
		}
		seen[id]++
	}
}

// extra returns how many bytes the longest number adds to an ID.
func (n *names) extra() int {
	if n.Repeated == 0 {
		return 0
	}
	return len(numberedID("", n.longest))
}

func (n *names) close() {
	for _, f := range append(n.parts, n.repeats...) {
		f.Close()
	}
}

// nameCursor goes through all objects in order.
type nameCursor struct {
	object int64
	parts  []*repeatReader
}

// repeatReader looks one record ahead.
type repeatReader struct {
	in     *bufio.Reader
	object int64 // -1 at the end
	number int32
}

func (r *repeatReader) next() error {
	var rec [nameRecord]byte
	switch _, err := io.ReadFull(r.in, rec[:]); {
	case errors.Is(err, io.EOF):
		r.object = -1
	case err != nil:
		return err
	default:
		r.object = int64(binary.LittleEndian.Uint64(rec[:]))
		r.number = int32(binary.LittleEndian.Uint64(rec[8:]))
	}
	return nil
}

func (n *names) cursor() (*nameCursor, error) {
	c := &nameCursor{}
	for _, f := range n.repeats {
		r := &repeatReader{in: bufio.NewReaderSize(io.NewSectionReader(f, 0, 1<<62), 1<<12)}
		if err := r.next(); err != nil {
			return nil, err
		}
		c.parts = append(c.parts, r)
	}
	return c, nil
}

// unique returns the ID of the next object.
func (c *nameCursor) unique(id string) (string, error) {
	for _, r := range c.parts {
		if r.object == c.object {
			id = numberedID(id, r.number)
			if err := r.next(); err != nil {
				return "", err
			}
		}
	}
	c.object++
	return id, nil
}

func numberedID(id string, n int32) string { return id + "#" + strconv.Itoa(int(n)) }

// hashID hashes an ID, and what is left of it without numbers at its end.
func hashID(id string) (base, full uint64) {
	var numbers []int32
	for {
		at := strings.LastIndexByte(id, '#')
		if at < 0 {
			break
		}
		k, err := strconv.ParseInt(id[at+1:], 10, 32)
		if err != nil || k < 0 || strconv.FormatInt(k, 10) != id[at+1:] {
			break
		}
		numbers = append(numbers, int32(k))
		id = id[:at]
	}
	sum := sha256.Sum256([]byte(id))
	base = binary.LittleEndian.Uint64(sum[:])
	full = base
	for i := len(numbers) - 1; i >= 0; i-- {
		full = numberedHash(full, numbers[i])
	}
	return base, full
}

// numberedHash is the hash of an ID with a number after it.
func numberedHash(id uint64, n int32) uint64 {
	var text [12]byte
	binary.LittleEndian.PutUint64(text[:], id)
	binary.LittleEndian.PutUint32(text[8:], uint32(n))
	sum := sha256.Sum256(text[:])
	return binary.LittleEndian.Uint64(sum[:])
}
