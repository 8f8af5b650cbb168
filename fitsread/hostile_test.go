package fitsread

import (
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"duskline/internal/outside"
	"duskline/spectrum"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// Each hostile file names the failure it must cause.
func TestHostileFiles(t *testing.T) {
	good := string(pixelTable(64))
	swap := func(from, to string) []byte {
		if !strings.Contains(good, from) {
			t.Fatalf("the good file has no %q", from)
		}
		return []byte(strings.Replace(good, from, to, 1))
	}
	card := func(key, value string) []byte { // replaces a card of the table's header
		i := strings.Index(good[blockLen:], key)
		if i < 0 {
			t.Fatalf("the good file has no card %s", key)
		}
		i += blockLen
		c := key + strings.Repeat(" ", 8-len(key)) + "= " + value
		return []byte(good[:i] + c + strings.Repeat(" ", 80-len(c)) + good[i+80:])
	}
	heap := func(n, at uint32) []byte {
		raw := join(empty(), table("", 40, []tcol{{name: "WAVE", form: "1PE(9)", arrays: make([][]float64, 40)}, {name: "FLUX", form: "1PE(9)", arrays: make([][]float64, 40)}}))
		i := 2 * blockLen
		copy(raw[i:], []byte{byte(n >> 24), byte(n >> 16), byte(n >> 8), byte(n), byte(at >> 24), byte(at >> 16), byte(at >> 8), byte(at)})
		return raw
	}
	tests := []struct {
		name string
		data []byte
		kind error
	}{
		{"empty", nil, ErrNotFITS},
		{"text", []byte("wave flux\n4000 1.0\n"), ErrNotFITS},
		{"binary", []byte{0x89, 'P', 'N', 'G', 0, 0, 0, 1}, ErrNotFITS},
		{"gzip of nothing", []byte{0x1f, 0x8b}, ErrTruncated},
		{"no END", []byte(strings.Repeat(" ", 0) + "SIMPLE  =                    T" + strings.Repeat(" ", 5000)), ErrTruncated},
		{"only a primary header", empty(), ErrNoSpectrum},
		{"BITPIX 17", swap("BITPIX  =                    8", "BITPIX  =                   17"), ErrBadHeader},
		{"NAXIS a word", swap("NAXIS   =                    0", "NAXIS   =                 many"), ErrBadHeader},
		{"NAXIS 999", swap("NAXIS   =                    0", "NAXIS   =                  999"), ErrBadHeader},
		{"row of 1e11 bytes", card("NAXIS1", "        100000000000"), ErrBadHeader},
		{"1e18 rows", card("NAXIS2", " 1000000000000000000"), ErrBadHeader},
		{"negative rows", card("NAXIS2", "                  -5"), ErrBadHeader},
		{"rows beyond the file", card("NAXIS2", "                9999"), ErrTruncated},
		{"heap of 1e18 bytes", card("PCOUNT", " 1000000000000000000"), ErrTruncated},
		{"999 columns", card("TFIELDS", "                 999"), ErrBadHeader},
		{"1e9 columns", card("TFIELDS", "          1000000000"), ErrBadHeader},
		{"column wider than the row", card("TFORM2", "'999E    '"), ErrBadHeader},
		{"column of 0E", card("TFORM2", "'0E      '"), ErrBadHeader},
		{"lower-case nonsense", card("TFORM2", "'zz      '"), ErrBadHeader},
		{"descriptor of 4e9 elements", heap(math.MaxUint32, 0), ErrBadHeader},
		{"descriptor beyond the heap", heap(9, 1<<30), ErrBadHeader},
		{"image beyond the limit", image(true, 8, []int{1 << 30}, nil, logAxis...), ErrTooLarge},
		{"image beyond the file", image(true, 8, []int{1 << 20}, nil, logAxis...), ErrTruncated},
	}
	for _, tt := range tests {
		f, err := Open(save(t, tt.data), Options{})
		if err == nil {
			_, err = f.Read(0)
			f.Close()
		}
		var re *ReadError
		if !errors.Is(err, tt.kind) || !errors.As(err, &re) {
			t.Errorf("%s: %v, want %v", tt.name, err, tt.kind)
			continue
		}
		if re.Hint == "" || !strings.Contains(err.Error(), "lantern.fits") || errors.Is(err, ErrInternal) {
			t.Errorf("%s: %v", tt.name, err)
		}
	}
}

// Paths that are no files are refused without blocking.
func TestNotFiles(t *testing.T) {
	dir := t.TempDir()
	pipe := filepath.Join(dir, "pipe")
	if err := syscall.Mkfifo(pipe, 0o644); err != nil {
		outside.Missing(t, "no pipes here: %v", err)
	}
	link := filepath.Join(dir, "link.fits")
	if err := os.Symlink(pipe, link); err != nil {
		t.Fatal(err)
	}
	loop := filepath.Join(dir, "loop.fits")
	if err := os.Symlink(loop, loop); err != nil {
		t.Fatal(err)
	}
	for path, kind := range map[string]error{
		loop: syscall.ELOOP, filepath.Join(pipe, "below.fits"): syscall.ENOTDIR, dir: ErrNotRegular, pipe: ErrNotRegular, link: ErrNotRegular, "/dev/zero": ErrNotRegular,
		filepath.Join(dir, "none.fits"): fs.ErrNotExist,
	} {
		done := make(chan error, 1)
		go func() {
			_, err := Open(path, Options{})
			if err != nil && strings.Contains(err.Error(), "changed into something else") {
				err = fmt.Errorf("it was opened: %v", err) // which moves a tape
			}
			done <- err
			if kind == ErrNotRegular { // as when it takes the place of a file in this moment
				_, _, err = openRegular(path)
				done <- err
				return
			}
			done <- kind
		}()
		for range 2 {
			select {
			case err := <-done:
				if !errors.Is(err, kind) {
					t.Errorf("%s: %v, want %v", path, err, kind)
				}
			case <-time.After(10 * time.Second): // far beyond any disk: it hangs
				t.Fatalf("%s: still opening", path)
			}
		}
	}
}

// A file that is written to, cut or removed while it is open.
func TestFileThatChanges(t *testing.T) {
	data := pixelTable(500)
	for name, change := range map[string]func(path string) error{
		"cut":     func(path string) error { return os.Truncate(path, 3*blockLen) },
		"grown":   func(path string) error { return os.Truncate(path, int64(len(data)+blockLen)) },
		"touched": func(path string) error { return os.Chtimes(path, time.Time{}, time.Unix(2e9, 0)) },
	} {
		path := save(t, data)
		f, err := Open(path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		if err := change(path); err != nil {
			t.Fatal(err)
		}
		if _, err := f.Read(0); !errors.Is(err, ErrChanged) {
			t.Errorf("%s: read %v", name, err)
		}
		if _, err := f.Digest(0); !errors.Is(err, ErrChanged) {
			t.Errorf("%s: digest %v", name, err)
		}
		f.Close()
	}
	path := save(t, data)
	f := open(t, data, Options{})
	if err := os.Remove(f.path); err != nil {
		t.Fatal(err)
	}
	if _, err := f.Read(0); err != nil { // what is open stays
		t.Errorf("removed: %v", err)
	}
	closed, err := Open(path, Options{}) // as when a server goes away under an open file
	if err != nil {
		t.Fatal(err)
	}
	closed.Close()
	var re *ReadError
	if _, err := closed.Read(0); !errors.As(err, &re) || re.Hint == "" || !errors.Is(err, fs.ErrClosed) {
		t.Errorf("gone: %v", err)
	}
}

// Names of any bytes are opened, and told in one line.
func TestNamesOfFiles(t *testing.T) {
	for _, name := range []string{"a b.fits", "line\nbreak.fits", "caf\xe9.fits", "tab\t.fits", "'quoted\".fits", "-o.fits", "日本.fits"} {
		path := filepath.Join(t.TempDir(), name)
		if err := os.WriteFile(path, pixelTable(64), 0o644); err != nil {
			t.Fatal(err)
		}
		f, err := Open(path, Options{})
		if err != nil {
			t.Errorf("%q: %v", name, err)
			continue
		}
		if s := read(t, f, 0); s.SourceFile != path {
			t.Errorf("%q became %q", path, s.SourceFile)
		}
		f.Close()
		_, err = Open(path+"\n", Options{})
		if err == nil || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: %v", name, err)
		}
	}
}

// Data that say nothing are read as such.
func TestUselessData(t *testing.T) {
	n := 64
	nan := constant(n, math.NaN())
	for name, col := range map[string]tcol{
		"all NaN flux":     {name: "FLUX", form: "D", data: nan},
		"all infinite":     {name: "FLUX", form: "D", data: constant(n, math.Inf(1))},
		"huge":             {name: "FLUX", form: "D", data: constant(n, math.MaxFloat64)},
		"all zero":         {name: "FLUX", form: "D", data: constant(n, 0)},
		"smallest numbers": {name: "FLUX", form: "D", data: constant(n, 5e-324)},
	} {
		s := first(t, join(empty(), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)}, col})))
		if s.Segments[0].Good() != 0 {
			t.Errorf("%s: %d good pixels", name, s.Segments[0].Good())
		}
	}
	for name, wave := range map[string][]float64{"NaN": nan, "zero": constant(n, 0), "negative": constant(n, -1), "equal": constant(n, 4000)} {
		f := open(t, join(empty(), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: wave}, {name: "FLUX", form: "D", data: noisy(n, 1)}})), Options{})
		if _, err := f.Read(0); !errors.Is(err, ErrBadData) {
			t.Errorf("%s wavelengths: %v", name, err)
		}
	}
}

// tryFile opens and reads all of a file. Whatever happens must be spectra that
// keep the contract or errors that say what to do, and never the last resort.
func tryFile(t testing.TB, path string) (spectra int, err error) {
	t.Helper()
	f, err := Open(path, tightOptions(t))
	if err == nil {
		defer f.Close()
		spectra, err = tryAll(t, f)
	}
	if err != nil {
		var re *ReadError
		if !errors.As(err, &re) || re.File != path || re.Hint == "" || errors.Is(err, ErrInternal) {
			t.Fatalf("%#v: %v", err, err)
		}
	}
	return spectra, err
}

func tightOptions(t testing.TB) Options {
	return Options{MaxPixels: 1 << 16, MaxUnpacked: 1 << 22, Layouts: []Layout{example(t)}}
}

func tryAll(t testing.TB, f *File) (spectra int, err error) {
	t.Helper()
	for i := range min(f.Count(), 8) {
		s, err := f.Read(i)
		if err != nil {
			return spectra, err
		}
		checkContract(t, s)
		spectra++
	}
	f.Describe()
	return spectra, nil
}

// samples are small files of every layout.
func samples() map[string][]byte {
	n := 40
	all := map[string][]byte{
		"pixels": pixelTable(n),
		"cells": join(empty(), table("", 2, []tcol{{name: "ORDER", form: "I", data: []float64{1, 2}},
			{name: "WAVE", form: "40D", unit: "nm", data: ramp(2*n, 400, 1)}, {name: "FLUX", form: "40E", data: noisy(2*n, 1)}})),
		"heap": join(empty(), table("", 2, []tcol{{name: "LOGLAM", form: "1PE(40)", arrays: [][]float64{ramp(n, 3.6, 1e-4), ramp(n, 3.6, 1e-4)}},
			{name: "FLUX", form: "QE", arrays: [][]float64{noisy(n, 1), noisy(n, 1)}}})),
		"axis": image(true, -32, []int{n}, noisy(n, 1), logAxis...),
		"lines": image(true, -32, []int{n, 3}, stack(noisy(n, 1), constant(n, 1), constant(n, 0)),
			append([]string{kv("ARRAY1", "FLUX"), kv("ARRAY2", "ERROR"), kv("ARRAY3", "MASK")}, logAxis...)...),
		"arms":    join(empty(), armHDUs("B", n, 2, 4000), armHDUs("R", n, 2, 5000)),
		"example": exampleFile(),
		"gzipped": gzipped(pixelTable(n)),
		"table axis": join(image(true, -32, []int{n}, noisy(n, 1), kv("CTYPE1", "WAVE-TAB"), kv("CRVAL1", 0), kv("CDELT1", 1),
			kv("PS1_0", "W"), kv("PS1_1", "C")), table("W", 1, []tcol{{name: "C", form: "40D", unit: "nm", data: ramp(n, 500, 1)}})),
	}
	maps.Copy(all, packedSamples())
	for _, method := range []string{"NOCOMPRESS", "GZIP_1"} {
		all["packed table "+method] = packTable(method, n, 25, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)}, {name: "FLUX", form: "E", data: noisy(n, 1)}})
	}
	return all
}

// A file cut anywhere gives an error or what was whole before the cut.
func TestTruncated(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	path := filepath.Join(t.TempDir(), "cut.fits")
	for name, data := range samples() {
		var cuts []int
		for edge := 0; edge <= len(data); edge += blockLen {
			cuts = append(cuts, edge-1, edge, edge+1)
		}
		for range 60 {
			cuts = append(cuts, r.IntN(len(data)))
		}
		for _, cut := range cuts {
			if cut < 0 || cut > len(data) {
				continue
			}
			if err := os.WriteFile(path, data[:cut], 0o644); err != nil {
				t.Fatal(err)
			}
			n, err := tryFile(t, path)
			if cut == len(data) && err != nil {
				t.Errorf("%s: whole, and yet %v", name, err)
			}
			if cut < blockLen-1 && (err == nil || n > 0) {
				t.Errorf("%s cut at %d: read", name, cut)
			}
		}
	}
}

// A cut inside the only data is told as such.
func TestTruncatedKind(t *testing.T) {
	data := pixelTable(500)
	_, err := tryFile(t, save(t, data[:3*blockLen]))
	if !errors.Is(err, ErrTruncated) {
		t.Errorf("%v", err)
	}
	// Missing padding takes nothing.
	n := 500 * 16
	if spectra, err := tryFile(t, save(t, data[:2*blockLen+n])); spectra != 1 {
		t.Errorf("without padding: %v", err)
	}
	// Neither does a cut in a later HDU.
	two := join(data, table("NOTES", 50, []tcol{{name: "X", form: "D", data: ramp(50, 0, 1)}}))
	if spectra, err := tryFile(t, save(t, two[:len(two)-2000])); spectra != 1 {
		t.Errorf("later HDU cut: %v", err)
	}
}

// FuzzOpen: any bytes give spectra that keep the contract, or errors that say
// what to do; a panic is not caught here. Files are in memory for speed.
func FuzzOpen(f *testing.F) {
	for _, data := range samples() {
		f.Add(data)
	}
	opts := tightOptions(f)
	f.Fuzz(func(t *testing.T, data []byte) { tryBytes(t, data, opts) })
}

// A redshift in the input, in whatever card or table, changes nothing.
func TestRedshiftIsNotRead(t *testing.T) {
	n := 64
	cols := []tcol{{name: "loglam", form: "D", data: ramp(n, 3.6, 1e-4)}, {name: "flux", form: "E", data: noisy(n, 1)}, {name: "ivar", form: "E", data: constant(n, 1)}}
	results := table("RESULT", 1, []tcol{{name: "Z", form: "E", data: []float64{2.5}}, {name: "CLASS", form: "4A", text: []string{"STAR"}}})
	plain := first(t, join(empty(), table("COADD", n, cols)))
	told := first(t, join(empty(kv("Z", 2.5), kv("REDSHIFT", 2.5), kv("ZSOURCE", 2.5), kv("CLASS", "STAR")), table("COADD", n, cols, kv("Z", 2.5)), results))
	if diff := cmp.Diff(plain, told, cmpopts.EquateNaNs(), cmpopts.IgnoreFields(spectrum.Spectrum{}, "SourceFile", "InputDigest")); diff != "" {
		t.Error(diff)
	}
}
