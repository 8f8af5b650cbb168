package spill

import (
	"bufio"
	"container/heap"
	"encoding/binary"
	"errors"
	"io"
	"os"
	"slices"
)

// memoryBytes is how much text a Sorter keeps in memory.
const memoryBytes = 8 << 20

// Sorter sorts texts byte by byte. Texts beyond Most bytes are sorted in pieces
// that go to a file, and merged. First Add all, then Each.
type Sorter struct {
	Folder string // where the file is made
	Most   int    // bytes of texts in memory; 0 for 8 MB

	texts []string
	bytes int
	file  *os.File
	end   int64
	runs  [][2]int64 // first byte and length in the file
}

// textCost is what a text takes in memory beside its bytes.
const textCost = 16

// Add takes a text.
func (s *Sorter) Add(text string) error {
	s.texts = append(s.texts, text)
	s.bytes += len(text) + textCost
	most := s.Most
	if most == 0 {
		most = memoryBytes
	}
	if s.bytes < most {
		return nil
	}
	return s.flush()
}

func (s *Sorter) flush() (err error) {
	if s.file == nil {
		if s.file, err = File(s.Folder); err != nil {
			return err
		}
	}
	slices.Sort(s.texts)
	w := bufio.NewWriterSize(io.NewOffsetWriter(s.file, s.end), 1<<16)
	from := s.end
	for _, text := range s.texts {
		head := binary.AppendUvarint(nil, uint64(len(text)))
		w.Write(head)
		if _, err := w.WriteString(text); err != nil {
			return err
		}
		s.end += int64(len(head) + len(text))
	}
	s.runs = append(s.runs, [2]int64{from, s.end - from})
	clear(s.texts)
	s.texts, s.bytes = s.texts[:0], 0
	return w.Flush()
}

// Each visits all texts in order, those that are equal one after another. It may
// be called again.
func (s *Sorter) Each(visit func(text string) error) error {
	slices.Sort(s.texts)
	h := &merge{}
	for _, r := range s.runs {
		c := &cursor{in: bufio.NewReaderSize(io.NewSectionReader(s.file, r[0], r[1]), 1<<14)}
		if err := h.push(c); err != nil {
			return err
		}
	}
	rest := s.texts
	for len(*h) > 0 {
		c := (*h)[0]
		for len(rest) > 0 && rest[0] <= c.text {
			if err := visit(rest[0]); err != nil {
				return err
			}
			rest = rest[1:]
		}
		if err := visit(c.text); err != nil {
			return err
		}
		heap.Pop(h)
		if err := h.push(c); err != nil {
			return err
		}
	}
	for _, text := range rest {
		if err := visit(text); err != nil {
			return err
		}
	}
	return nil
}

// Close gives the file back.
func (s *Sorter) Close() error {
	if s.file == nil {
		return nil
	}
	return s.file.Close()
}

// cursor goes through one piece of the file.
type cursor struct {
	in   *bufio.Reader
	text string
}

// next reports false at the end.
func (c *cursor) next() (bool, error) {
	n, err := binary.ReadUvarint(c.in)
	if errors.Is(err, io.EOF) {
		return false, nil
	}
	if err != nil {
		return false, err
	}
	b := make([]byte, n)
	_, err = io.ReadFull(c.in, b)
	c.text = string(b)
	return err == nil, err
}

// merge is a heap of cursors by their texts.
type merge []*cursor

func (h merge) Len() int           { return len(h) }
func (h merge) Less(i, j int) bool { return h[i].text < h[j].text }
func (h merge) Swap(i, j int)      { h[i], h[j] = h[j], h[i] }
func (h *merge) Push(x any)        { *h = append(*h, x.(*cursor)) }

func (h *merge) Pop() any {
	old := *h
	last := old[len(old)-1]
	*h = old[:len(old)-1]
	return last
}

// push moves a cursor on and puts it into its place, if it is not at its end.
func (h *merge) push(c *cursor) error {
	ok, err := c.next()
	if ok {
		heap.Push(h, c)
	}
	return err
}
