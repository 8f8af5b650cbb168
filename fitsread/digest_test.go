package fitsread

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"maps"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"duskline/spectrum"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// counting counts the bytes that are read.
type counting struct {
	io.ReaderAt
	bytes int
}

func (c *counting) ReadAt(b []byte, off int64) (int, error) {
	n, err := c.ReaderAt.ReadAt(b, off)
	c.bytes += n
	return n, err
}

// inMemory opens a file in memory; nil if it cannot be opened.
func inMemory(data []byte, opts Options) (*File, *counting) {
	c := &counting{ReaderAt: bytes.NewReader(data)}
	f := &File{path: "memory.fits", opts: opts, src: &source{ReaderAt: c, size: int64(len(data))}}
	if f.load() != nil {
		return nil, c
	}
	return f, c
}

func digests(t *testing.T, data []byte) []string {
	t.Helper()
	f, _ := inMemory(data, Options{MaxPixels: 1 << 22})
	if f == nil {
		t.Fatal("it does not open")
	}
	var out []string
	for i := range f.Count() {
		s := read(t, f, i)
		d, err := f.Digest(i)
		if err != nil || d != s.InputDigest || len(d) != 16 {
			t.Fatalf("row %d: digests %q and %q, %v", i, d, s.InputDigest, err)
		}
		out = append(out, d)
	}
	return out
}

// rowFiles are files of several spectra in the ways that surveys have them, with
// the HDUs in which each spectrum has bytes of its own.
func rowFiles() map[string]struct {
	data []byte
	own  []int
} {
	const n, rows = 64, 5
	wave := image(false, -64, []int{n}, ramp(n, 3600, 0.8), kv("EXTNAME", "WAVELENGTH"), kv("BUNIT", "Angstrom"))
	flux := image(false, -32, []int{n, rows}, noisy(n*rows, 1), kv("EXTNAME", "FLUX"), kv("DATASUM", "0"))
	ivar := image(false, -32, []int{n, rows}, constant(n*rows, 1), kv("EXTNAME", "IVAR"), kv("DATASUM", "0"))
	targets := table("TARGETS", rows, []tcol{{name: "TARGETID", form: "K", data: ramp(rows, 11, 1)}, {name: "RA", form: "D", data: ramp(rows, 10, 1)},
		{name: "DEC", form: "D", data: ramp(rows, -4, 1)}})
	vector := func(code string) string { return fmt.Sprintf("%d%s", n, code) }
	cells := table("SPECTRA", rows, []tcol{{name: "WAVE", form: vector("D"), unit: "Angstrom", data: ramp(n*rows, 4000, 1)},
		{name: "FLUX", form: vector("E"), data: noisy(n*rows, 1)}, {name: "ERROR", form: vector("E"), data: constant(n*rows, 1)}})
	return map[string]struct {
		data []byte
		own  []int
	}{
		"image lines":  {join(empty(), wave, flux, ivar, targets), []int{2, 3, 4}},
		"vector cells": {join(empty(), cells), []int{1}},
	}
}

// A byte that changes in one row changes the digest of that spectrum, in every
// HDU in use, and of no other; what all share changes all.
func TestDigestIsOfOneRow(t *testing.T) {
	for name, file := range rowFiles() {
		want := digests(t, file.data)
		if len(slices.Compact(slices.Sorted(slices.Values(want)))) != len(want) {
			t.Errorf("%s: rows share digests: %v", name, want)
		}
		f, _ := inMemory(file.data, Options{MaxPixels: 1 << 22})
		rows := f.Count()
		for _, k := range file.own {
			h := f.hdus[k]
			for row := range rows {
				m := slices.Clone(file.data)
				m[h.offset+h.length/int64(rows)*int64(row)+3] ^= 1
				for i, d := range digests(t, m) {
					if (d != want[i]) != (i == row) {
						t.Errorf("%s: a byte of row %d in HDU %d changed; row %d: digest %s, was %s", name, row, k, i, d, want[i])
					}
				}
			}
		}
		for what, from := range map[string]string{"a header": "EXTNAME", "its primary header": "SIMPLE"} {
			m := slices.Clone(file.data)
			at := bytes.Index(m, []byte(from)) + 79
			m[at] = '!'
			for i, d := range digests(t, m) {
				if d == want[i] {
					t.Errorf("%s: %s changed and row %d has the same digest", name, what, i)
				}
			}
		}
	}
}

// The tile of one line of a compressed image is of that line's spectrum alone.
func TestDigestOfTiles(t *testing.T) {
	var lines [][]byte
	for i := range maxGuessLines + 1 { // fewer are read to tell what they are
		lines = append(lines, riceUnpacked(whole(40, 500+float64(i))))
	}
	data := packedImage("RICE_1", 32, 40, lines, kv("ZNAME1", "BLOCKSIZE"), kv("ZVAL1", 32), kv("ZNAME2", "BYTEPIX"), kv("ZVAL2", 4))
	want := digests(t, data)
	f, _ := inMemory(data, Options{MaxPixels: 1 << 22})
	m := slices.Clone(data)
	m[f.hdus[1].offset+f.hdus[1].length-2] ^= 1 // the last tile ends the heap
	for i, got := range digests(t, m) {
		if (got != want[i]) != (i == maxGuessLines) {
			t.Errorf("line %d: digest %s, was %s", i, got, want[i])
		}
	}
}

// Checksum cards follow from the data of other rows, and say nothing themselves.
func TestDigestLeavesChecksumsOut(t *testing.T) {
	file := rowFiles()["image lines"]
	other := slices.Clone(file.data)
	at := bytes.Index(other, []byte("DATASUM ="))
	if at < 0 {
		t.Fatal("the file has no DATASUM")
	}
	copy(other[at+10:], "'12345678'")
	if a, b := digests(t, file.data), digests(t, other); !slices.Equal(a, b) {
		t.Errorf("digests %v and %v", a, b)
	}
}

// A spectrum of a large file is read and digested without reading the file.
func TestDigestReadsOneRow(t *testing.T) {
	const n, rows = 64, 4000
	data := join(empty(), image(false, -64, []int{n}, ramp(n, 3600, 0.8), kv("EXTNAME", "WAVELENGTH"), kv("BUNIT", "Angstrom")),
		image(false, -32, []int{n, rows}, noisy(n*rows, 1), kv("EXTNAME", "FLUX")), image(false, -32, []int{n, rows}, constant(n*rows, 1), kv("EXTNAME", "IVAR")))
	f, c := inMemory(data, Options{MaxPixels: 1 << 22})
	opened := c.bytes
	if s := read(t, f, 3000); s.InputDigest == "" {
		t.Error("no digest")
	}
	// Opening reads headers in pieces of 8 blocks; the row is 64 float64 and 2 x 64 float32.
	if most := 4 * 8 * blockLen; opened > most {
		t.Errorf("opening read %d bytes, want at most %d", opened, most)
	}
	if got := c.bytes - opened; got != 64*(8+4+4) {
		t.Errorf("one spectrum took %d bytes of %d", got, len(data))
	}
}

// Whatever is changed in whatever file: where a spectrum comes out different, its
// digest is another.
func TestDigestTellsSpectraApart(t *testing.T) {
	all := samples()
	delete(all, "gzipped") // its bytes are not those of FITS
	for name, list := range layoutSamples() {
		for i, data := range list {
			all[fmt.Sprint(name, " ", i)] = data
		}
	}
	for name, file := range rowFiles() {
		all[name] = file.data
	}
	opts := Options{MaxPixels: 1 << 16, Layouts: []Layout{example(t)}}
	names := slices.Sorted(maps.Keys(all))
	spectra := func(data []byte) (out []*spectrum.Spectrum) {
		f, _ := inMemory(data, opts)
		if f == nil {
			return nil
		}
		for i := range min(f.Count(), 8) {
			s, _ := f.Read(i)
			out = append(out, s)
		}
		return out
	}
	same := func(a, b *spectrum.Spectrum) bool {
		return cmp.Equal(a, b, cmpopts.EquateNaNs(), cmpopts.IgnoreFields(spectrum.Spectrum{}, "InputDigest"))
	}
	changed, kept, equal := 0, 0, 0
	for i := range *mutants {
		name := names[i%len(names)]
		before := spectra(all[name])
		after := spectra(mutate(rand.New(rand.NewPCG(11, uint64(i))), all[name]))
		for k := range min(len(before), len(after)) {
			a, b := before[k], after[k]
			switch {
			case a == nil || b == nil:
			case !same(a, b):
				changed++
				if a.InputDigest == b.InputDigest {
					t.Errorf("%s, mutant %d: spectrum %d changed and its digest is still %s", name, i, k, a.InputDigest)
				}
			case a.InputDigest == b.InputDigest:
				kept++
			default:
				equal++
			}
		}
	}
	t.Logf("of %d files: %d spectra changed, %d were untouched, %d came out the same from other bytes", len(names), changed, kept, equal)
	if changed < *mutants/50 || kept < *mutants/50 {
		t.Error("the test is blind")
	}
}

// A spectrum that cannot be read has a digest all the same.
func TestDigestOfWhatCannotBeRead(t *testing.T) {
	const n = 64
	wave := ramp(2*n, 4000, 1)
	for i := range n {
		wave[i] = math.NaN()
	}
	data := join(empty(), table("SPECTRA", 2, []tcol{{name: "WAVE", form: fmt.Sprint(n, "D"), unit: "Angstrom", data: wave},
		{name: "FLUX", form: fmt.Sprint(n, "E"), data: noisy(2*n, 1)}}))
	f, _ := inMemory(data, Options{MaxPixels: 1 << 22})
	if f == nil {
		t.Fatal("it does not open")
	}
	if _, err := f.Read(0); !errors.Is(err, ErrBadData) {
		t.Fatalf("reading it: %v", err)
	}
	d1, err1 := f.Digest(0)
	d2, err2 := f.Digest(0)
	if err1 != nil || err2 != nil || d1 != d2 || len(d1) != 16 {
		t.Errorf("digests %q, %v and %q, %v", d1, err1, d2, err2)
	}
}
