package fitsread

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"duskline/spectrum"
)

func TestPixelTable(t *testing.T) {
	s := first(t, pixelTable(200))
	seg := &s.Segments[0]
	if s.Layout != layoutNamed || seg.Len() != 200 || seg.Good() != 200 {
		t.Fatalf("layout %s, %d pixels, %d good", s.Layout, seg.Len(), seg.Good())
	}
	near(t, "wave", seg.Wave[199], 4000+199*1.5, 1e-15)
	near(t, "ivar", seg.Ivar[7], 1, 1e-15)
	if s.ObjectID != "lantern" {
		t.Errorf("id %q, want the file's name", s.ObjectID)
	}
}

// Every stored type, with scaling and null values, gives the numbers that the
// FITS standard 4.0 (sections 7.3.2, 7.3.3) defines.
func TestColumnTypes(t *testing.T) {
	n := 40
	flux := make([]float64, n)
	for i := range flux {
		flux[i] = float64(i%7 + 3)
	}
	for _, form := range []string{"B", "1I", "J", "K", "E", "D"} {
		c := tcol{name: "FLUX", form: form, data: flux, more: []stem{{"TSCAL", 0.5}, {"TZERO", 100}}}
		if form != "E" && form != "D" {
			c.more = append(c.more, stem{"TNULL", 5})
		}
		s := first(t, join(empty(), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)}, c,
			{name: "IVAR", form: "E", data: constant(n, 2)}})))
		seg := &s.Segments[0]
		near(t, form+" flux", seg.Flux[1], 4*0.5+100, 1e-15)
		near(t, form+" wave", seg.Wave[1], 4010, 1e-12)
		if isNull := form != "E" && form != "D"; (seg.Ivar[2] == 0) != isNull {
			t.Errorf("%s: null value has weight %g", form, seg.Ivar[2])
		}
	}
}

func TestTextTable(t *testing.T) {
	n := 60
	var body strings.Builder
	for i := range n {
		fmt.Fprintf(&body, " %6.1f  %7.1E   0.5D0 ", 4000.5+float64(i), float64(15+i%2))
	}
	head := []string{kv("XTENSION", "TABLE   "), kv("BITPIX", 8), kv("NAXIS", 2), kv("NAXIS1", 25), kv("NAXIS2", n), kv("PCOUNT", 0),
		kv("GCOUNT", 1), kv("TFIELDS", 3), kv("TTYPE1", "WAVE"), kv("TFORM1", "F7.1"), kv("TBCOL1", 1), kv("TUNIT1", "Angstrom"),
		kv("TTYPE2", "FLUX"), kv("TFORM2", "E9.1"), kv("TBCOL2", 9), kv("TTYPE3", "ERR"), kv("TFORM3", "D8.1"), kv("TBCOL3", 18)}
	data := join(empty(), block(head...), padded([]byte(body.String())))
	seg := &first(t, data).Segments[0]
	near(t, "wave", seg.Wave[0], 4000.5, 1e-15)
	near(t, "flux", seg.Flux[0], 15, 1e-15)
	near(t, "ivar", seg.Ivar[30], 4, 1e-15)
}

// Vector cells: one row, many rows, arrays on the heap, logarithms, orders.
func TestVectorCells(t *testing.T) {
	n, rows := 64, 3
	wave := append(append(ramp(n, 4000, 1), ramp(n, 4500, 1)...), ramp(n, 5000, 1)...)
	flux := noisy(n*rows, 1)
	err := constant(n*rows, 1)
	cols := []tcol{{name: "WAVE", form: "64D", unit: "Angstrom", data: wave}, {name: "FLUX", form: "64E", data: flux}, {name: "ERROR", form: "64E", data: err}}
	f := open(t, join(empty(), table("", rows, cols)), Options{})
	if f.Count() != rows {
		t.Fatalf("%d spectra, want one a row", f.Count())
	}
	s := read(t, f, 2)
	near(t, "row 2", s.Segments[0].Wave[0], 5000, 1e-15)
	if s.ObjectID != "lantern#2" {
		t.Errorf("id %q", s.ObjectID)
	}

	orders := append([]tcol{{name: "ORDER", form: "I", data: []float64{12, 11, 10}}}, cols...)
	f = open(t, join(empty(), table("", rows, orders)), Options{})
	if s = read(t, f, 0); f.Count() != 1 || len(s.Segments) != 3 {
		t.Errorf("orders: %d spectra, %d segments", f.Count(), len(s.Segments))
	}

	targets := append([]tcol{{name: "TARGETID", form: "K", data: []float64{7, 1 << 52, 9}}, {name: "RA", form: "D", data: []float64{10, 20, 30}},
		{name: "DEC", form: "D", data: []float64{-1, -2, -3}}}, orders...)
	f = open(t, join(empty(), table("", rows, targets)), Options{})
	if s = read(t, f, 1); f.Count() != 3 || s.ObjectID != "4503599627370496" || s.RA != 20 || s.Dec != -2 {
		t.Errorf("targets: %d spectra, %s at %g %g", f.Count(), s.ObjectID, s.RA, s.Dec)
	}

	for _, form := range []string{"1PE(64)", "QE(64)"} {
		heap := []tcol{{name: "LOGLAM", form: strings.Replace(form, "E", "D", 1), arrays: [][]float64{ramp(n, 3.6, 1e-4), ramp(n-4, 3.7, 1e-4)}},
			{name: "FLUX", form: form, arrays: [][]float64{flux[:n], flux[:n-4]}}}
		f = open(t, join(empty(), table("", 2, heap)), Options{})
		s = read(t, f, 1)
		if seg := &s.Segments[0]; seg.Len() != n-4 || !seg.LogUniform {
			t.Errorf("%s: %d pixels, log uniform %v", form, seg.Len(), seg.LogUniform)
		}
		near(t, form, s.Segments[0].Wave[0], math.Pow(10, 3.7), 1e-14)
	}
}

// Start and step beside a vector, with the number of points in use: a file that
// the FITS library itself ships for its tests (IUE, extracted 1979). LAMBDA,
// DELTAW and NPTS were read with astropy 5.2.
func TestStartAndStep(t *testing.T) {
	path := filepath.Join(moduleDir(t, "github.com/astrogo/fitsio"), "testdata", "swp06542llg.fits")
	f, err := Open(path, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s := read(t, f, 0)
	seg := &s.Segments[0]
	if seg.Len() != 376 {
		t.Fatalf("%d pixels, want 376", seg.Len())
	}
	near(t, "start", seg.Wave[0], 1000.0, 1e-3)
	near(t, "step", seg.Wave[100]-seg.Wave[0], 100*2.6515, 1e-3)
	if s.Medium != spectrum.Vacuum {
		t.Error("below 2000 Angstrom wavelengths are in vacuum")
	}
	if flux := f.Describe().Parts[0].Flux; !strings.Contains(flux, "ABNET") {
		t.Errorf("flux from %s, want the calibrated net flux", flux)
	}
	if !math.IsNaN(s.RA) {
		t.Errorf("position %g %g, want none for 0, 0", s.RA, s.Dec)
	}
}

// Which of several tables is read.
func TestSeveralTables(t *testing.T) {
	n := 64
	arm := func(name string, start float64, more ...tcol) []byte {
		return table(name, n, append([]tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(n, start, 1)},
			{name: "FLUX", form: "E", data: noisy(n, 1)}, {name: "IVAR", form: "E", data: constant(n, 1)}}, more...))
	}
	mask := tcol{name: "MASK", form: "J", data: constant(n, 0)}
	tests := []struct {
		name     string
		data     []byte
		spectra  int
		segments int
		start    float64
		skipped  int
	}{
		{"arms, out of order", join(empty(), arm("RED", 6000), arm("BLUE", 4000)), 1, 2, 4000, 0},
		{"boxcar and optimal", join(empty(), arm("Boxcar-B", 4001), arm("Boxcar-R", 6001), arm("Optimal-B", 4000), arm("Optimal-R", 6000)), 1, 2, 4000, 2},
		{"coadd and exposures", join(empty(), arm("EXP1", 4000, mask), arm("COADD", 4100)), 1, 1, 4100, 1},
		{"product and exposures of other columns", join(empty(), arm("", 4100), arm("B1-0001", 4000, mask), arm("B1-0002", 4000, mask)), 1, 1, 4100, 2},
		{"an object an extension", join(empty(), arm("LR-001", 4000), arm("LR-002", 4000), arm("LR-003", 4000)), 3, 1, 4000, 0},
		{"line list first", join(empty(), table("LINES", 5, []tcol{{name: "WAVE", form: "D", data: ramp(5, 4000, 9)},
			{name: "FLUX", form: "E", data: noisy(5, 1)}}), arm("SPECTRUM", 4200)), 1, 1, 4200, 0},
	}
	for _, tt := range tests {
		f := open(t, tt.data, Options{})
		s := read(t, f, 0)
		if f.Count() != tt.spectra || len(s.Segments) != tt.segments || s.Segments[0].Wave[0] != tt.start || len(f.plan.skipped) != tt.skipped {
			t.Errorf("%s: %d spectra, %d segments from %g, %d skipped", tt.name, f.Count(), len(s.Segments), s.Segments[0].Wave[0], len(f.plan.skipped))
		}
	}
}

// UCDs and utypes go before names: here the names mislead.
func TestIVOA(t *testing.T) {
	n := 64
	cols := []tcol{
		{name: "FLUX", form: "D", unit: "nm", data: ramp(n, 500, 1), more: []stem{{"TUCD", "em.wl;obs.atmos"}}},
		{name: "WAVE", form: "D", data: noisy(n, 1), more: []stem{{"TUTYP", "spec:Data.FluxAxis.Value"}}},
		{name: "C", form: "D", data: constant(n, 2), more: []stem{{"TUCD", "stat.error;phot.flux.density;em.wl"}}},
		{name: "D", form: "I", data: append([]float64{3}, constant(n-1, 0)...), more: []stem{{"TUTYP", "Spectrum.Data.FluxAxis.Quality"}}},
	}
	s := first(t, join(empty(), table("", n, cols)))
	seg := &s.Segments[0]
	if s.Layout != layoutIVOA || s.Medium != spectrum.Air || s.Has(spectrum.MediumAssumed) {
		t.Errorf("layout %s, medium %v, %s", s.Layout, s.Medium, codes(s))
	}
	near(t, "wave", seg.Wave[0], 5000, 1e-15)
	near(t, "ivar", seg.Ivar[5], 0.25, 1e-15)
	if seg.Ivar[0] != 0 {
		t.Error("quality 3 has weight")
	}
}

func TestGuess(t *testing.T) {
	n := 64
	cols := []tcol{{name: "COL1", form: "D", data: ramp(n, 9000, -2)}, {name: "COL2", form: "D", data: noisy(n, 0.5)},
		{name: "COL3", form: "D", data: constant(n, 4)}}
	s := first(t, join(empty(), table("", n, cols)))
	if s.Layout != layoutGuess || !s.Has(spectrum.LayoutAssumed) {
		t.Errorf("layout %s, %s", s.Layout, codes(s))
	}
	seg := &s.Segments[0]
	near(t, "reversed", seg.Wave[0], 9000-63*2, 1e-15)
	near(t, "4 is the inverse variance of a scatter of 0.5", seg.Ivar[0], 4, 1e-15)
}
