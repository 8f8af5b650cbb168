package fitsread

import (
	"errors"
	"math"
	"strings"
	"sync"
	"testing"

	"duskline/spectrum"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

var logAxis = []string{kv("COEFF0", 3.6), kv("COEFF1", 1e-4)}

func stack(lines ...[]float64) []float64 {
	var all []float64
	for _, l := range lines {
		all = append(all, l...)
	}
	return all
}

// Lines of one image told apart by cards, a list of words, or their numbers.
func TestImageLines(t *testing.T) {
	n := 128
	flux := noisy(n, 2)
	tests := []struct {
		name  string
		cards []string
		lines [][]float64
		ivar  float64 // expected
		doubt bool
	}{
		{"a card a line, sigma", []string{kv("ARRAY1", "SPECTRUM"), kv("ARRAY2", "CONTINUUM-SUBTRACTED SPECTRUM"), kv("ARRAY3", "ERROR"), kv("ARRAY4", "MASK")},
			[][]float64{flux, constant(n, 7), constant(n, 2), constant(n, 0)}, 0.25, false},
		{"a word a line, inverse variance", []string{kv("EXTEN0", "Flux Inverse Subcontinuum Andmask Ormask")},
			[][]float64{flux, constant(n, 0.2), constant(n, 7), constant(n, 5), constant(n, 5)}, 0.2, false},
		{"by numbers, inverse variance", nil, [][]float64{flux, constant(n, 0.3)}, 0.3, true},
		{"by numbers, sigma", nil, [][]float64{flux, constant(n, 1.5)}, 1 / 2.25, true},
	}
	for _, tt := range tests {
		data := image(true, -64, []int{n, len(tt.lines)}, stack(tt.lines...), append(tt.cards, logAxis...)...)
		f := open(t, data, Options{})
		s := read(t, f, 0)
		if f.Count() != 1 {
			t.Fatalf("%s: %d spectra", tt.name, f.Count())
		}
		near(t, tt.name, s.Segments[0].Ivar[9], tt.ivar, 1e-12)
		near(t, tt.name+" flux", s.Segments[0].Flux[9], flux[9], 1e-15)
		if s.Has(spectrum.LayoutAssumed) != tt.doubt {
			t.Errorf("%s: doubts %s", tt.name, codes(s))
		}
	}
}

// A cube of apertures by kinds, as extraction programs write it.
func TestCube(t *testing.T) {
	n := 100
	lines := stack(constant(n, 1), constant(n, 2), constant(n, 3), constant(n, 4), ramp(n, 5, 0.1), ramp(n, 6, 0.1))
	bands := []string{kv("BANDID1", "raw - background none, weights none"), kv("BANDID2", "sigma - background fit, weights variance"),
		kv("BANDID3", "spectrum - background fit, weights variance, clean yes")}
	f := open(t, image(true, -64, []int{n, 2, 3}, lines, append(bands, logAxis...)...), Options{})
	if f.Count() != 2 {
		t.Fatalf("%d spectra, want 2 apertures", f.Count())
	}
	seg := &read(t, f, 1).Segments[0]
	near(t, "flux", seg.Flux[0], 6, 1e-15)
	near(t, "weight", seg.Ivar[0], 1.0/16, 1e-15)
	f = open(t, image(true, -64, []int{n, 2, 3}, lines, logAxis...), Options{})
	s := read(t, f, 1)
	near(t, "first plane", s.Segments[0].Flux[0], 2, 1e-15)
	if f.Count() != 2 || !s.Has(spectrum.LayoutAssumed) {
		t.Errorf("without words: %d spectra, %s", f.Count(), codes(s))
	}
}

// Several goroutines may read one file; the spectra are those of one.
func TestConcurrentReads(t *testing.T) {
	f := open(t, join(empty(), armHDUs("B", 64, 6, 4000), armHDUs("R", 64, 6, 5000)), Options{})
	want := make([]*spectrum.Spectrum, f.Count())
	for i := range want {
		want[i] = read(t, f, i)
	}
	got := make([]*spectrum.Spectrum, f.Count())
	var wg sync.WaitGroup
	for i := range got {
		wg.Go(func() {
			got[i], _ = f.Read(i)
			f.Digest(i)
		})
	}
	wg.Wait()
	if diff := cmp.Diff(want, got, cmpopts.EquateNaNs()); diff != "" {
		t.Error(diff)
	}
}

func TestObjectALine(t *testing.T) {
	n := 100
	a, b := ramp(n, -50, 1), ramp(n, 50, -1) // negative values: no weights
	f := open(t, image(true, -32, []int{n, 2}, stack(a, b), logAxis...), Options{})
	if f.Count() != 2 {
		t.Fatalf("%d spectra, want an object a line", f.Count())
	}
	near(t, "second line", read(t, f, 1).Segments[0].Flux[0], 50, 1e-7)
}

// armHDUs is one arm of a file with an object a line.
func armHDUs(prefix string, n, objects int, start float64) []byte {
	return join(
		image(false, -64, []int{n}, ramp(n, start, 1), kv("EXTNAME", prefix+"_WAVELENGTH"), kv("BUNIT", "Angstrom")),
		image(false, -32, []int{n, objects}, noisy(n*objects, 1), kv("EXTNAME", prefix+"_FLUX"), kv("BUNIT", "ct")),
		image(false, -32, []int{n, objects}, constant(n*objects, 1), kv("EXTNAME", prefix+"_IVAR")),
		compressed(prefix+"_MASK"))
}

func compressed(name string) []byte {
	return table(name, 1, []tcol{{name: "COMPRESSED_DATA", form: "1PB(4)", arrays: [][]float64{{1, 2, 3, 4}}}},
		"ZIMAGE  =                    T", kv("ZNAXIS", 2))
}

func TestArmsOfImages(t *testing.T) {
	n, objects := 64, 3
	targets := table("TARGETS", objects, []tcol{{name: "TARGETID", form: "8A", text: []string{"LR-1", "LR-2", "LR-3"}},
		{name: "TARGET_RA", form: "D", data: []float64{1, 2, 3}}, {name: "TARGET_DEC", form: "D", data: []float64{4, 5, 6}}})
	kernel := make([]float64, 0, n*3*objects)
	for range objects {
		kernel = append(kernel, stack(constant(n, 0.25), constant(n, 0.5), constant(n, 0.25))...)
	}
	data := join(empty(kv("RA", 99.0), kv("DEC", 9.0)), targets, armHDUs("R", n, objects, 5000), armHDUs("B", n, objects, 4000),
		image(false, -32, []int{n, 3, objects}, kernel, kv("EXTNAME", "B_RESOLUTION")))
	f := open(t, data, Options{})
	s := read(t, f, 1)
	if f.Count() != 3 || len(s.Segments) != 2 || s.Segments[0].Name != "B" || s.Segments[1].Name != "R" {
		t.Fatalf("%d spectra, %d segments", f.Count(), len(s.Segments))
	}
	if s.ObjectID != "LR-2" || s.RA != 2 || s.Dec != 5 {
		t.Errorf("%s at %g %g", s.ObjectID, s.RA, s.Dec)
	}
	// The kernel 1/4 1/2 1/4 has variance 1/2; R = lambda / (2.3548 sigma dlambda).
	near(t, "resolving power", s.Segments[0].Resolution[30], 4030/(2*math.Sqrt(2*math.Ln2)*math.Sqrt(0.5)), 1e-7)
	if s.FluxUnit != "ct" {
		t.Errorf("unit %q", s.FluxUnit)
	}
}

// A compressed image is refused where it is needed, with the way out.
func TestCompressed(t *testing.T) {
	n := 64
	data := join(empty(), image(false, -64, []int{n}, ramp(n, 4000, 1), kv("EXTNAME", "WAVELENGTH"), kv("BUNIT", "Angstrom")), compressed("FLUX"))
	_, err := Open(save(t, data), Options{})
	if !errors.Is(err, ErrCompressed) || !strings.Contains(err.Error(), "funpack") {
		t.Errorf("%v", err)
	}
}

// Companions by name beside a primary image with an axis.
func TestCompanions(t *testing.T) {
	n := 128
	quality := constant(n, 0)
	quality[3] = 1
	data := join(image(true, -32, []int{n}, noisy(n, 1), logAxis...),
		image(false, -32, []int{n}, constant(n, 2), kv("EXTNAME", "ERRS")),
		image(false, 16, []int{n}, quality, kv("EXTNAME", "QUAL")))
	s := first(t, data)
	near(t, "ivar", s.Segments[0].Ivar[0], 0.25, 1e-7)
	if s.Segments[0].Ivar[3] != 0 {
		t.Error("flagged pixel has weight")
	}
}

// BSCALE, BZERO and BLANK (FITS standard 4.0, section 4.4.2.5).
func TestImageScaling(t *testing.T) {
	n := 50
	v := ramp(n, -10, 1)
	data := image(true, 16, []int{n}, v, append([]string{kv("BSCALE", 2.0), kv("BZERO", 100.0), kv("BLANK", -7)}, logAxis...)...)
	seg := &first(t, data).Segments[0]
	near(t, "scaled", seg.Flux[0], -10*2+100, 1e-15)
	if seg.Ivar[3] != 0 || seg.Ivar[4] == 0 {
		t.Error("the blank pixel, and only it, weighs zero")
	}
}

func TestGzip(t *testing.T) {
	plain := pixelTable(200)
	s := first(t, gzipped(plain))
	if got, want := s.Segments[0].Flux[17], first(t, plain).Segments[0].Flux[17]; got != want {
		t.Errorf("flux %g, want %g", got, want)
	}
	f1, f2 := open(t, plain, Options{}), open(t, gzipped(plain), Options{})
	d1, _ := f1.Digest(0)
	d2, _ := f2.Digest(0)
	if d1 != d2 || len(d1) != 16 {
		t.Errorf("digests %s and %s of the same bytes", d1, d2)
	}
	_, err := Open(save(t, gzipped(plain)), Options{MaxUnpacked: 5000})
	if !errors.Is(err, ErrTooLarge) {
		t.Errorf("bomb: %v", err)
	}
	z := gzipped(plain)
	_, err = Open(save(t, z[:len(z)-20]), Options{})
	if !errors.Is(err, ErrTruncated) {
		t.Errorf("cut: %v", err)
	}
}

// An axis of one object at the end of a cube of kernels is still one of objects.
func TestKernelOfOneObject(t *testing.T) {
	n := 64
	s := first(t, join(empty(), image(false, -64, []int{n}, ramp(n, 3600, 0.8), kv("EXTNAME", "B_WAVELENGTH")),
		image(false, -32, []int{n, 1}, noisy(n, 1), kv("EXTNAME", "B_FLUX")), image(false, -32, []int{n, 1}, constant(n, 1), kv("EXTNAME", "B_IVAR")),
		image(false, -32, []int{n, 3, 1}, stack(constant(n, 1), constant(n, 2), constant(n, 1)), kv("EXTNAME", "B_RESOLUTION"))))
	// The kernel 1 2 1 has variance 1/2.
	seg := &s.Segments[0]
	if len(seg.Resolution) != n {
		t.Fatal("no resolution")
	}
	near(t, "R", seg.Resolution[0], seg.Wave[0]/(sigmaToFWHM*math.Sqrt(0.5)*0.8), 1e-12)
}
