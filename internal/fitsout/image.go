package fitsout

import (
	"encoding/binary"
	"fmt"
	"math"
)

// Pixel is a type of image value; its BITPIX is 8, 16, 32, 64, -32 or -64.
type Pixel interface {
	uint8 | int16 | int32 | int64 | float32 | float64
}

// WriteImage writes data as the primary HDU if it is the first of the file,
// else as an image extension with the given EXTNAME (which may be empty). The
// first axis runs fastest and the product of the axes is len(data). NaN marks
// missing values (section 4.4.2.5).
func WriteImage[T Pixel](w *Writer, h *Header, name string, axes []int, data []T) error {
	if len(axes) == 0 || len(axes) > 999 {
		return w.fail(fmt.Errorf("FITS image %q: %d axes, want 1 to 999", name, len(axes)))
	}
	s := structure{bitpix: bitpix[T](), name: name}
	want := 1
	for _, n := range axes {
		if n < 0 {
			return w.fail(fmt.Errorf("FITS image %q: axis of length %d", name, n))
		}
		want *= n
		s.axes = append(s.axes, int64(n))
	}
	if want != len(data) {
		return w.fail(fmt.Errorf("FITS image %q: axes %v hold %d values, %d given", name, axes, want, len(data)))
	}
	u, err := w.begin(s, h)
	if err != nil {
		return err
	}
	var cell [8]byte
	for _, v := range data {
		if err := u.write(appendBig(cell[:0], v)); err != nil {
			return err
		}
	}
	return u.finish()
}

func bitpix[T Pixel]() int {
	var zero T
	switch any(zero).(type) {
	case uint8:
		return 8
	case int16:
		return 16
	case int32:
		return 32
	case int64:
		return 64
	case float32:
		return -32
	}
	return -64
}

// appendBig appends v in the big-endian form of section 5.
func appendBig[T Pixel](b []byte, v T) []byte {
	switch x := any(v).(type) {
	case uint8:
		return append(b, x)
	case int16:
		return binary.BigEndian.AppendUint16(b, uint16(x))
	case int32:
		return binary.BigEndian.AppendUint32(b, uint32(x))
	case int64:
		return binary.BigEndian.AppendUint64(b, uint64(x))
	case float32:
		return binary.BigEndian.AppendUint32(b, math.Float32bits(x))
	case float64:
		return binary.BigEndian.AppendUint64(b, math.Float64bits(x))
	}
	panic("unreachable: Pixel is a closed set of types")
}
