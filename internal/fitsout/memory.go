package fitsout

import (
	"errors"
	"io"
)

// Memory is a file in memory that a Writer can fill, for output that cannot
// seek, such as a compressed stream. The zero value is empty.
type Memory struct {
	data []byte
	pos  int64
}

// Bytes returns the content; it is valid until the next write.
func (m *Memory) Bytes() []byte { return m.data }

// Reset empties m and keeps its storage.
func (m *Memory) Reset() { m.data, m.pos = m.data[:0], 0 }

// Write implements io.Writer; it never fails.
func (m *Memory) Write(p []byte) (int, error) {
	for int64(len(m.data)) < m.pos {
		m.data = append(m.data, 0)
	}
	n := copy(m.data[m.pos:], p)
	m.data = append(m.data, p[n:]...)
	m.pos += int64(len(p))
	return len(p), nil
}

// Seek implements io.Seeker.
func (m *Memory) Seek(offset int64, whence int) (int64, error) {
	switch whence {
	case io.SeekCurrent:
		offset += m.pos
	case io.SeekEnd:
		offset += int64(len(m.data))
	}
	if offset < 0 {
		return 0, errors.New("seek before the start")
	}
	m.pos = offset
	return offset, nil
}
