package manifest

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	"duskline/internal/spill"
)

// memoryMost is how many entries a manifest keeps in memory; more go to a file.
const memoryMost = 20_000

// store keeps entries by their numbers' references: those of the first ones are
// places in memory, the others' bytes of a file from there on.
type store struct {
	most  int
	first []Entry
	file  *os.File
	out   *bufio.Writer
	end   int64
	n     int
}

// add returns the reference of an entry, whose number it sets.
func (s *store) add(e Entry) (ref int64, err error) {
	e.Number = s.n
	s.n++
	if len(s.first) < s.most {
		s.first = append(s.first, e)
		return int64(len(s.first) - 1), nil
	}
	if s.file == nil {
		if s.file, err = spill.File(""); err != nil {
			return 0, fmt.Errorf("it is too large to be held in memory: %w", err)
		}
		s.out = bufio.NewWriterSize(s.file, 1<<16)
	}
	ref = int64(s.most) + s.end
	text := e.append(nil)
	k, err := s.out.Write(binary.AppendUvarint(nil, uint64(len(text))))
	if err == nil {
		_, err = s.out.Write(text)
	}
	s.end += int64(k + len(text))
	return ref, err
}

// done ends the adding.
func (s *store) done() error {
	if s.out == nil {
		return nil
	}
	return s.out.Flush()
}

// get returns the entry of a reference. Several goroutines may call it.
func (s *store) get(ref int64) (*Entry, error) {
	if ref < int64(s.most) {
		return &s.first[ref], nil
	}
	r := bufio.NewReaderSize(io.NewSectionReader(s.file, ref-int64(s.most), 1<<62), 512)
	return readEntry(r)
}

// each visits all entries in order.
func (s *store) each(visit func(*Entry) error) error {
	for i := range s.first {
		if err := visit(&s.first[i]); err != nil {
			return err
		}
	}
	if s.file == nil {
		return nil
	}
	r := bufio.NewReaderSize(io.NewSectionReader(s.file, 0, s.end), 1<<16)
	for {
		e, err := readEntry(r)
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err == nil {
			err = visit(e)
		}
		if err != nil {
			return err
		}
	}
}

func readEntry(r *bufio.Reader) (*Entry, error) {
	n, err := binary.ReadUvarint(r)
	if err != nil {
		return nil, err
	}
	text := make([]byte, n)
	if _, err := io.ReadFull(r, text); err != nil {
		return nil, err
	}
	e := &Entry{}
	e.parse(text)
	return e, nil
}

// append writes an entry behind b, for parse.
func (e *Entry) append(b []byte) []byte {
	excluded := int64(0)
	if e.Exclude {
		excluded = 1
	}
	for _, v := range []int64{int64(e.Number), int64(e.Line), int64(e.Row), excluded} {
		b = binary.AppendVarint(b, v)
	}
	for _, v := range []float64{e.RA, e.Dec, e.Magnitude, e.RedshiftMin, e.RedshiftMax} {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
	}
	for _, v := range []string{e.File, e.ObjectID, e.ExpectedClass} {
		b = binary.AppendUvarint(b, uint64(len(v)))
		b = append(b, v...)
	}
	return b
}

// parse reads what append wrote.
func (e *Entry) parse(b []byte) {
	whole := func() int {
		v, n := binary.Varint(b)
		b = b[n:]
		return int(v)
	}
	e.Number, e.Line, e.Row = whole(), whole(), whole()
	e.Exclude = whole() == 1
	for _, v := range []*float64{&e.RA, &e.Dec, &e.Magnitude, &e.RedshiftMin, &e.RedshiftMax} {
		*v, b = math.Float64frombits(binary.LittleEndian.Uint64(b)), b[8:]
	}
	for _, v := range []*string{&e.File, &e.ObjectID, &e.ExpectedClass} {
		n, k := binary.Uvarint(b)
		*v, b = string(b[k:k+int(n)]), b[k+int(n):]
	}
}
