package fitsread

import (
	"bytes"
	"compress/gzip"
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"duskline/spectrum"
)

// The files of these tests are written here, card by card, so that they can be
// wrong on purpose. The spectra in them are invented.

func block(cards ...string) []byte {
	var b bytes.Buffer
	for _, c := range append(cards, "END") {
		fmt.Fprintf(&b, "%-80s", c)
	}
	for b.Len()%blockLen != 0 {
		b.WriteByte(' ')
	}
	return b.Bytes()
}

func kv(key string, value any) string {
	switch v := value.(type) {
	case string:
		return fmt.Sprintf("%-8s= '%s'", key, v)
	case bool:
		if v {
			return fmt.Sprintf("%-8s= %20s", key, "T")
		}
		return fmt.Sprintf("%-8s= %20s", key, "F")
	}
	return fmt.Sprintf("%-8s= %20v", key, value)
}

func padded(data []byte) []byte {
	for len(data)%blockLen != 0 {
		data = append(data, 0)
	}
	return data
}

// encode writes values as the type letter says.
func encode(code byte, values []float64) []byte {
	var b []byte
	for _, v := range values {
		switch code {
		case 'B':
			b = append(b, byte(v))
		case 'L':
			b = append(b, map[float64]byte{0: 'F', 1: 'T'}[v])
		case 'I':
			b = binary.BigEndian.AppendUint16(b, uint16(int16(v)))
		case 'J':
			b = binary.BigEndian.AppendUint32(b, uint32(int32(v)))
		case 'K':
			b = binary.BigEndian.AppendUint64(b, uint64(int64(v)))
		case 'E':
			b = binary.BigEndian.AppendUint32(b, math.Float32bits(float32(v)))
		case 'D':
			b = binary.BigEndian.AppendUint64(b, math.Float64bits(v))
		}
	}
	return b
}

func empty(cards ...string) []byte {
	return block(append([]string{"SIMPLE  =                    T", kv("BITPIX", 8), kv("NAXIS", 0)}, cards...)...)
}

// image writes a primary HDU for an empty name beginning with "" and first true,
// else an IMAGE extension.
func image(first bool, bitpix int, axes []int, data []float64, cards ...string) []byte {
	head := []string{"SIMPLE  =                    T"}
	if !first {
		head[0] = kv("XTENSION", "IMAGE   ")
	}
	head = append(head, kv("BITPIX", bitpix), kv("NAXIS", len(axes)))
	for i, a := range axes {
		head = append(head, kv(fmt.Sprintf("NAXIS%d", i+1), a))
	}
	if !first {
		head = append(head, kv("PCOUNT", 0), kv("GCOUNT", 1))
	}
	code := map[int]byte{8: 'B', 16: 'I', 32: 'J', 64: 'K', -32: 'E', -64: 'D'}[bitpix]
	return append(block(append(head, cards...)...), padded(encode(code, data))...)
}

// tcol is one column; data holds all rows one after the other.
type tcol struct {
	name, form, unit string
	data             []float64
	text             []string    // for A columns
	arrays           [][]float64 // for P and Q columns, an array a row
	more             []stem      // TUCDn and the like
}

// stem is a card whose keyword gets the column's number.
type stem struct {
	key   string
	value any
}

func table(name string, rows int, cols []tcol, cards ...string) []byte {
	cells := make([][][]byte, len(cols)) // column, row
	var heap []byte
	width := 0
	head := []string{}
	for k, c := range cols {
		head = append(head, kv(fmt.Sprintf("TTYPE%d", k+1), c.name), kv(fmt.Sprintf("TFORM%d", k+1), c.form))
		if c.unit != "" {
			head = append(head, kv(fmt.Sprintf("TUNIT%d", k+1), c.unit))
		}
		for _, e := range c.more {
			head = append(head, kv(fmt.Sprintf("%s%d", e.key, k+1), e.value))
		}
		col := column{form: c.form}
		if !col.readForm() {
			panic("test writes a bad form " + c.form)
		}
		for r := range rows {
			var cell []byte
			switch {
			case c.text != nil:
				cell = []byte(fmt.Sprintf("%-*s", col.repeat, c.text[r]))
			case c.arrays != nil:
				n, at := uint64(len(c.arrays[r])), uint64(len(heap))
				if col.heap == 'P' {
					cell = binary.BigEndian.AppendUint32(binary.BigEndian.AppendUint32(nil, uint32(n)), uint32(at))
				} else {
					cell = binary.BigEndian.AppendUint64(binary.BigEndian.AppendUint64(nil, n), at)
				}
				heap = append(heap, encode(col.code, c.arrays[r])...)
			default:
				n := int(col.repeat)
				cell = encode(col.code, c.data[r*n:(r+1)*n])
			}
			cells[k] = append(cells[k], cell)
		}
		width += int(col.width)
	}
	var data []byte
	for r := range rows {
		for k := range cols {
			data = append(data, cells[k][r]...)
		}
	}
	data = append(data, heap...)
	head = append([]string{kv("XTENSION", "BINTABLE"), kv("BITPIX", 8), kv("NAXIS", 2), kv("NAXIS1", width), kv("NAXIS2", rows),
		kv("PCOUNT", len(heap)), kv("GCOUNT", 1), kv("TFIELDS", len(cols))}, head...)
	if name != "" {
		head = append(head, kv("EXTNAME", name))
	}
	return append(block(append(head, cards...)...), padded(data)...)
}

func join(parts ...[]byte) []byte { return bytes.Join(parts, nil) }

func gzipped(data []byte) []byte {
	var b bytes.Buffer
	z := gzip.NewWriter(&b)
	z.Write(data)
	z.Close()
	return b.Bytes()
}

// save writes a file for one test.
func save(t testing.TB, data []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "lantern.fits")
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func open(t testing.TB, data []byte, opts Options) *File {
	t.Helper()
	f, err := Open(save(t, data), opts)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f
}

// first reads spectrum 0 of a file and checks the contract.
func first(t testing.TB, data []byte) *spectrum.Spectrum {
	t.Helper()
	return read(t, open(t, data, Options{}), 0)
}

func read(t testing.TB, f *File, i int) *spectrum.Spectrum {
	t.Helper()
	s, err := f.Read(i)
	if err != nil {
		t.Fatal(err)
	}
	checkContract(t, s)
	return s
}

func checkContract(t testing.TB, s *spectrum.Spectrum) {
	t.Helper()
	if len(s.Segments) == 0 {
		t.Fatal("no segments")
	}
	for i := range s.Segments {
		if err := s.Segments[i].Check(); err != nil {
			t.Fatalf("segment %d: %v", i, err)
		}
	}
}

// ramp returns n values from start in equal steps.
func ramp(n int, start, step float64) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = start + step*float64(i)
	}
	return v
}

func constant(n int, c float64) []float64 { return ramp(n, c, 0) }

// noisy returns a flux of 10 with Gaussian noise of the given sigma.
func noisy(n int, sigma float64) []float64 {
	r := rand.New(rand.NewPCG(1, uint64(n)))
	v := make([]float64, n)
	for i := range v {
		v[i] = 10 + sigma*r.NormFloat64()
	}
	return v
}

// near fails unless got is within rel of want.
func near(t testing.TB, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s = %.15g, want %.15g within %g", what, got, want, rel)
	}
}

func codes(s *spectrum.Spectrum) string {
	var c []string
	for _, w := range s.Warnings {
		c = append(c, string(w.Code))
	}
	return strings.Join(c, " ")
}

// pixelTable is the plainest file: a table with a row a pixel.
func pixelTable(n int, cols ...tcol) []byte {
	base := []tcol{
		{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(n, 4000, 1.5)},
		{name: "FLUX", form: "E", data: noisy(n, 1)},
		{name: "ERR", form: "E", data: constant(n, 1)},
	}
	return join(empty(), table("SPECTRUM", n, append(base, cols...)))
}
