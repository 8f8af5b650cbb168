package fitsread

import (
	"math"
	"strings"
	"testing"

	"duskline/spectrum"

	"github.com/google/go-cmp/cmp"
)

// Pixels that must not be used are told with their cause and place, each once.
func TestLosses(t *testing.T) {
	const n = 200
	nan := math.NaN()
	file := func(flux, weight []float64, weightName string, more ...tcol) []byte {
		return join(empty(), table("", n, append([]tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(n, 4000, 1.5)},
			{name: "FLUX", form: "D", data: flux}, {name: weightName, form: "D", data: weight}}, more...)))
	}
	with := func(v []float64, from int, values ...float64) []float64 {
		copy(v[from:], values)
		return v
	}
	for _, tt := range []struct {
		name string
		data []byte
		want []spectrum.Loss
	}{
		{"nothing", file(noisy(n, 1), constant(n, 1), "IVAR"), nil},
		{"flux NaN", file(constant(n, nan), constant(n, 1), "IVAR"), []spectrum.Loss{{Cause: "flux NaN or infinite", Where: "column FLUX of HDU 1", Pixels: n}}},
		{"flux constant", file(constant(n, 5), constant(n, 1), "IVAR"), []spectrum.Loss{{Cause: "flux the same everywhere, 5", Where: "column FLUX of HDU 1", Pixels: n}}},
		{"flux constant under other errors", file(constant(n, 5), ramp(n, 1, 1), "IVAR"), []spectrum.Loss{{Cause: "flux the same everywhere, 5", Where: "column FLUX of HDU 1", Pixels: n}}},
		{"ends constant", file(with(noisy(n, 1), 0, constant(9, 5)...), constant(n, 1), "IVAR"), []spectrum.Loss{{Cause: "padding of constant flux at the ends", Where: "column FLUX of HDU 1", Pixels: 9}}},
		{"inverse variance negative", file(noisy(n, 1), constant(n, -1), "IVAR"), []spectrum.Loss{{Cause: "inverse variance negative", Where: "column IVAR of HDU 1", Pixels: n}}},
		{"sigma of all kinds", file(with(noisy(n, 1), 60, nan, nan, nan), with(constant(n, 1), 50, 0, -1, -2, nan, math.Inf(1), nan, 0, 0, 1, 1, 0), "ERR"), []spectrum.Loss{
			{Cause: "sigma NaN or infinite", Where: "column ERR of HDU 1", Pixels: 3}, {Cause: "sigma negative", Where: "column ERR of HDU 1", Pixels: 2},
			{Cause: "sigma zero", Where: "column ERR of HDU 1", Pixels: 3}, {Cause: "flux NaN or infinite", Where: "column FLUX of HDU 1", Pixels: 3}}},
		{"masked", file(noisy(n, 1), constant(n, 1), "ERR", tcol{name: "GOOD", form: "I", data: with(constant(n, 0), 0, constant(20, 1)...)}),
			[]spectrum.Loss{{Cause: "masked", Where: "column GOOD of HDU 1", Pixels: n - 20}}},
	} {
		s := first(t, tt.data)
		if d := cmp.Diff(tt.want, s.Losses); d != "" {
			t.Errorf("%s: losses (-want +got)\n%s", tt.name, d)
		}
		lost := 0
		for _, l := range s.Losses {
			lost += l.Pixels
		}
		if s.Pixels != n || s.Segments[0].Good() != n-lost {
			t.Errorf("%s: %d of %d pixels are good, %d lost; want %d in all and each pixel told once", tt.name, s.Segments[0].Good(), s.Pixels, lost, n)
		}
	}
}

// Why nothing can be read names what was looked for, and where.
func TestNothingToRead(t *testing.T) {
	rows := func(n int, wave []float64) []byte {
		return join(empty(), table("SPEC", n, []tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: wave}, {name: "FLUX", form: "D", data: noisy(n, 1)}}))
	}
	for _, tt := range []struct {
		name string
		data []byte
		want []string
	}{
		{"header alone", empty(), []string{"looked for a table with wavelength and flux", "HDU 0 (image, no data) and nothing after it (2880 bytes)", "check that the file is whole"}},
		{"no rows", rows(0, nil), []string{`HDU 1 "SPEC" (table, 2 columns, 0 rows: WAVE FLUX; it is empty)`}},
		{"few rows", rows(9, ramp(9, 4000, 1)), []string{"9 rows: WAVE FLUX; a spectrum with a row a pixel has at least 32"}},
		{"image without an axis", image(true, -32, []int{50}, noisy(50, 1)), []string{"HDU 0 (image, 50; no CTYPE1)"}},
		{"wavelengths NaN", rows(50, constant(50, math.NaN())), []string{"HDU 1, column WAVE, row 0: no wavelengths that can be used: of 50, 50 NaN or infinite"}},
		{"wavelengths zero", rows(50, constant(50, 0)), []string{"column WAVE", "50 zero or negative"}},
		{"wavelengths the same", rows(50, constant(50, 5000)), []string{"column WAVE", "50 the same or out of order"}},
	} {
		f, err := Open(save(t, tt.data), Options{})
		if err == nil {
			_, err = f.Read(0)
			f.Close()
		}
		for _, want := range tt.want {
			if err == nil || !strings.Contains(err.Error(), want) {
				t.Errorf("%s: %v, want %q in it", tt.name, err, want)
			}
		}
	}
}

// Errors that are zero throughout are said to be that, not to be missing.
func TestErrorsAllZero(t *testing.T) {
	s := first(t, join(empty(), table("", 99, []tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(99, 4000, 1)},
		{name: "FLUX", form: "D", data: noisy(99, 1)}, {name: "ERR", form: "D", data: constant(99, 0)}})))
	if !s.Has(spectrum.NoiseEstimated) || !strings.Contains(s.Warnings[0].Text, "the errors in column ERR of HDU 1 are all zero") {
		t.Errorf("warnings %v", s.Warnings)
	}
}

// Values that no detector gives are dropped, with their number and why; a strong line is not.
func TestFluxFarOff(t *testing.T) {
	n := 400
	read := func(value float64) *spectrum.Spectrum {
		flux := noisy(n, 1)
		for i := range flux {
			flux[i] += 10
		}
		for i := 200; i < 203; i++ {
			flux[i] = value
		}
		return first(t, join(empty(), table("", n, []tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(n, 4000, 1)},
			{name: "FLUX", form: "D", data: flux}, {name: "ERR", form: "D", data: constant(n, 1)}})))
	}
	for _, value := range []float64{1e30, -1e30, 1e11} {
		s := read(value)
		if seg := &s.Segments[0]; seg.Good() != n-3 || seg.Ivar[201] != 0 || !s.Has(spectrum.ValuesDropped) {
			t.Errorf("%g: %d good of %d, warnings %v", value, seg.Good(), n, s.Warnings)
		}
		if len(s.Losses) != 1 || s.Losses[0].Pixels != 3 {
			t.Errorf("%g: losses %v", value, s.Losses)
		}
	}
	if s := read(1e6); s.Segments[0].Good() != n || s.Has(spectrum.ValuesDropped) {
		t.Errorf("a line of 1e5 times the continuum: %d good of %d", s.Segments[0].Good(), n)
	}
}
