package fitsread

import (
	"bytes"
	"compress/gzip"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math/bits"
	"sync"
)

var errShortTile = errors.New("its bytes end too early")

// decode unpacks the whole numbers, or the floating-point ones that were packed
// without loss, of a tile.
func (t *tiles) decode(out []float64, raw []byte) error {
	n := int64(len(out))
	switch t.method {
	case "RICE_1", "RICE_ONE":
		return unrice(out, raw, t.bytePix, t.block)
	case "PLIO_1":
		return unplio(out, raw)
	case "GZIP_1", "GZIP_2":
		var err error
		if raw, err = inflate(raw, 8*n); err != nil {
			return err
		}
	}
	size := int64(len(raw)) / n
	if size*n != int64(len(raw)) {
		return fmt.Errorf("%d bytes for %d pixels", len(raw), n)
	}
	if t.method == "GZIP_2" { // the most significant bytes of all pixels come first
		raw = unshuffle(raw, size)
	}
	c := column{scale: 1, code: map[int64]byte{1: 'B', 2: 'I', 4: 'J', 8: 'K'}[size]}
	if t.isFloat && !t.quantized && size == t.pixelSize {
		c.code = map[int64]byte{4: 'E', 8: 'D'}[size]
	}
	if c.code == 0 {
		return fmt.Errorf("%d bytes for %d pixels", len(raw), n)
	}
	c.decode(out, raw)
	return nil
}

// inflate unpacks a gzip stream of at most limit bytes.
func inflate(raw []byte, limit int64) ([]byte, error) {
	z, err := gzip.NewReader(bytes.NewReader(raw))
	if err != nil {
		return nil, err
	}
	out, err := io.ReadAll(io.LimitReader(z, limit+1))
	if err == nil && int64(len(out)) > limit {
		err = fmt.Errorf("it unpacks to more than %d bytes", limit)
	}
	return out, err
}

// unrice unpacks a tile of Rice's code (FITS standard 4.0, section 10.4.1): the
// first pixel as it is, then blocks of differences between neighbors, each mapped
// to a non-negative number whose low bits, as many as the block's first bits
// say, stand as they are behind the high ones in unary. Differences wrap round at
// the size of a pixel.
func unrice(out []float64, raw []byte, bytePix, block int) error {
	idBits, most := map[int]int{1: 3, 2: 4, 4: 5}[bytePix], map[int]int{1: 6, 2: 14, 4: 25}[bytePix]
	if len(raw) < bytePix {
		return errShortTile
	}
	s := bitStream{data: raw}
	last := uint32(s.take(8 * bytePix))
	for i := 0; i < len(out); i += block {
		low := int(s.take(idBits)) - 1
		for k := i; k < min(i+block, len(out)); k++ {
			var d uint32
			switch {
			case low < 0: // all equal
			case low == most: // not packed
				d = uint32(s.take(8 * bytePix))
			default:
				d = s.unary()<<low | uint32(s.take(low))
			}
			if d&1 == 0 {
				last += d >> 1
			} else {
				last += ^(d >> 1)
			}
			switch bytePix {
			case 1:
				out[k] = float64(uint8(last))
			case 2:
				out[k] = float64(int16(last))
			default:
				out[k] = float64(int32(last))
			}
		}
		if s.short {
			return errShortTile
		}
	}
	return nil
}

// bitStream takes bits from the high end of bytes.
type bitStream struct {
	data  []byte
	have  uint64 // bits not yet taken, at the low end
	count int
	short bool // more was asked for than there is
}

func (s *bitStream) fill() {
	for s.count <= 56 && len(s.data) > 0 {
		s.have = s.have<<8 | uint64(s.data[0])
		s.data = s.data[1:]
		s.count += 8
	}
}

// take returns the next n bits, at most 32.
func (s *bitStream) take(n int) uint64 {
	if s.count < n {
		if s.fill(); s.count < n {
			s.short = true
			return 0
		}
	}
	s.count -= n
	return s.have >> s.count & (1<<n - 1)
}

// unary returns the number of zeros before the next one.
func (s *bitStream) unary() uint32 {
	zeros := 0
	for {
		if s.count == 0 {
			if s.fill(); s.count == 0 {
				s.short = true
				return 0
			}
		}
		left := s.have & (1<<s.count - 1)
		if left == 0 {
			zeros += s.count
			s.count = 0
			continue
		}
		lead := s.count - bits.Len64(left)
		s.count -= lead + 1
		return uint32(zeros + lead)
	}
}

// unplio unpacks a tile of PLIO, the run-length code of masks (FITS standard 4.0,
// section 10.4.3): 16-bit words of a 4-bit operation and 12 bits of data.
func unplio(out []float64, raw []byte) error {
	words := len(raw) / 2
	word := func(i int) int { return int(binary.BigEndian.Uint16(raw[2*i:])) }
	if words < 3 {
		return errShortTile
	}
	first, end := 3, word(2)
	if int16(word(2)) <= 0 { // the long form of the preamble
		if words < 5 {
			return errShortTile
		}
		first, end = word(1), word(4)<<15+word(3)
	}
	if end > words || first < 3 {
		return errShortTile
	}
	clear(out)
	x, value := 0, 1 // the value begins at 1
	fill := func(n, v int) {
		for ; n > 0 && x < len(out); n-- {
			out[x] = float64(v)
			x++
		}
	}
	for i := first; i < end; i++ {
		op, data := word(i)>>12, word(i)&0xfff
		switch op {
		case 0: // zeros
			fill(data, 0)
		case 1: // a new value, its high bits in the next word
			if i++; i == end {
				return errShortTile
			}
			value = word(i)<<12 | data
		case 2, 3: // the value grows or shrinks
			value += data * (5 - 2*op)
		case 4: // a run of the value
			fill(data, value)
		case 5: // zeros that end in one pixel of the value
			fill(data-1, 0)
			fill(1, value)
		case 6, 7: // the value grows or shrinks and stands once
			value += data * (13 - 2*op)
			fill(1, value)
		default:
			return fmt.Errorf("operation %d is not one of PLIO", op)
		}
	}
	return nil
}

// ditherLen is the length of the sequence of pseudo-random numbers, and ditherZero
// the whole number that SUBTRACTIVE_DITHER_2 keeps for pixels of exactly zero.
const (
	ditherLen  = 10000
	ditherZero = -2147483646
)

// ditherSequence returns the pseudo-random numbers of FITS standard 4.0, appendix
// I: the multiplicative generator of Park & Miller (1988, Comm. ACM 31, 1192) from
// seed 1, over 2^31 - 1.
var ditherSequence = sync.OnceValue(func() []float32 {
	const multiplier, modulus = 16807, 1<<31 - 1
	v, seed := make([]float32, ditherLen), int64(1)
	for i := range v {
		seed = seed * multiplier % modulus
		v[i] = float32(float64(seed) / modulus)
	}
	return v
})
