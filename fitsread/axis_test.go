package fitsread

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"duskline/internal/checkvalues"
	"duskline/spectrum"
)

// The world values of testdata/fits_spectral_axis.csv come from wcslib through
// astropy.wcs 5.2. The axis code gives wavelengths, so the world value is
// recovered from the wavelength by the definitions of FITS Paper III, table 1.
// 1e-9 relative: the task's own figure; the file prints 13 digits.
func TestAxisCodes(t *testing.T) {
	rows := checkvalues.Rows(t, "testdata/fits_spectral_axis.csv")
	const restFrequency = 1420405751.786 // Hz, of the Paper III example (section 10.1)
	tested := 0
	for _, row := range rows[1:] {
		num := func(i int) float64 { return checkvalues.Number(t, row[i]) }
		if strings.HasPrefix(row[0], "wcslib") {
			near(t, row[0]+" "+row[2], standardVacuumToAir(num(2)), num(7), 1e-10)
			tested++
			continue
		}
		h := header{
			{key: "CTYPE1", rest: " '" + row[1] + "'"}, {key: "CRVAL1", rest: row[2]}, {key: "CDELT1", rest: row[3]},
			{key: "CRPIX1", rest: row[4]}, {key: "CUNIT1", rest: " '" + row[5] + "'"},
			{key: "RESTFRQ", rest: fmt.Sprint(restFrequency)},
		}
		a, ok, err := readAxis(h, 1)
		if err != nil || !ok {
			t.Fatalf("%s: %v %v", row[0], ok, err)
		}
		pixel := int(num(6))
		v, inMeters := a.wavelengths(pixel)
		w := v[pixel-1:]
		unit := a.unit
		if inMeters {
			unit = spectralUnit{wavelength, 1, linear}
		}
		unit.toAngstrom(w, a.rest)
		meters := w[0] * angstrom
		if a.code == "AWAV" && !a.isAir() {
			meters = standardVacuumToAir(meters)
		}
		near(t, row[0]+" pixel "+row[6], valueOf(a.unit.quantity, meters, a.rest), num(7), 1e-9)
		tested++
	}
	if tested < 40 {
		t.Errorf("only %d values tested", tested)
	}
}

// valueOf is the inverse of wavelengthOf for every quantity: an identity.
func TestQuantityRoundTrip(t *testing.T) {
	for q := wavelength; q <= betaSpeed; q++ {
		for _, w := range []float64{1.1e-7, 5e-7, 2.2e-6} {
			near(t, fmt.Sprint(q), wavelengthOf(q, valueOf(q, w, 4.8e-7), 4.8e-7), w, 1e-14)
		}
	}
	near(t, "air round trip", standardAirToVacuum(standardVacuumToAir(5e-7)), 5e-7, 1e-15)
}

func axisImage(n int, cards ...string) []byte {
	return image(true, -32, []int{n}, noisy(n, 1), cards...)
}

// Start and end of axes given by cards. Expected wavelengths follow from the
// definitions of the units (exact SI values) by hand.
func TestAxisCards(t *testing.T) {
	const hc = 12398.419843320026 // eV Angstrom, h c / e of the SI of 2019
	tests := []struct {
		name        string
		cards       []string
		first, last float64
		medium      spectrum.Medium
		doubt       string
	}{
		{"air, nm", []string{kv("CTYPE1", "AWAV"), kv("CUNIT1", "nm"), kv("CRVAL1", 500.0), kv("CRPIX1", 1), kv("CDELT1", 0.1)},
			5000, 5099, spectrum.Air, ""},
		{"vacuum, m without unit, CRPIX", []string{kv("CTYPE1", "WAVE"), kv("CRVAL1", 5e-7), kv("CRPIX1", 11), kv("CDELT1", 1e-10)},
			4990, 5089, spectrum.Vacuum, ""},
		{"log of the standard", []string{kv("CTYPE1", "WAVE-LOG"), kv("CUNIT1", "Angstrom"), kv("CRVAL1", 4000.0), kv("CRPIX1", 1), kv("CDELT1", 4000*math.Ln10*1e-4)},
			4000, 4000 * math.Pow(10, 99e-4), spectrum.Vacuum, ""},
		{"energy, decreasing wavelength", []string{kv("CTYPE1", "ENER"), kv("CUNIT1", "eV"), kv("CRVAL1", 2.0), kv("CRPIX1", 1), kv("CDELT1", 0.01)},
			hc / 2.99, hc / 2, spectrum.Vacuum, ""},
		{"frequency", []string{kv("CTYPE1", "FREQ"), kv("CUNIT1", "THz"), kv("CRVAL1", 500.0), kv("CRPIX1", 1), kv("CDELT1", 1.0)},
			2997924.58 / 599, 2997924.58 / 500, spectrum.Vacuum, ""},
		{"wavenumber", []string{kv("CTYPE1", "WAVN"), kv("CUNIT1", "cm-1"), kv("CRVAL1", 10000.0), kv("CRPIX1", 1), kv("CDELT1", 10.0)},
			1e8 / 10990, 1e8 / 10000, spectrum.Vacuum, ""},
		{"optical velocity", []string{kv("CTYPE1", "VOPT"), kv("CUNIT1", "km/s"), kv("CRVAL1", 0.0), kv("CRPIX1", 1), kv("CDELT1", 1000.0), kv("RESTWAV", 5e-7)},
			5000, 5000 * (1 + 99000/299792.458), spectrum.Vacuum, ""},
		{"flag of a log axis", []string{kv("CTYPE1", "LINEAR"), kv("CRVAL1", 3.6), kv("CDELT1", 1e-4), kv("CRPIX1", 1), kv("DC-FLAG", 1)},
			math.Pow(10, 3.6), math.Pow(10, 3.6099), spectrum.Vacuum, "medium_assumed"},
		{"coefficients of a log axis", []string{kv("COEFF0", 3.6), kv("COEFF1", 1e-4)},
			math.Pow(10, 3.6), math.Pow(10, 3.6099), spectrum.Vacuum, "medium_assumed"},
		{"log axis by its numbers", []string{kv("CRVAL1", 3.6), kv("CD1_1", 1e-4)},
			math.Pow(10, 3.6), math.Pow(10, 3.6099), spectrum.Vacuum, "layout_assumed medium_assumed"},
		{"natural log axis by its numbers", []string{kv("CRVAL1", 8.5), kv("CDELT1", 1e-4)},
			math.Exp(8.5), math.Exp(8.5099), spectrum.Vacuum, "layout_assumed medium_assumed"},
		{"unit in a WAT card", []string{kv("CTYPE1", "LINEAR"), kv("WAT1_001", "wtype=linear label=Wavelength units=nanometers"), kv("CRVAL1", 500), kv("CD1_1", 1)},
			5000, 5990, spectrum.Vacuum, "medium_assumed"},
		{"no unit, optical", []string{kv("CRVAL1", 4000), kv("CDELT1", 2)},
			4000, 4198, spectrum.Vacuum, "unit_assumed medium_assumed"},
		{"no unit, nm", []string{kv("CRVAL1", 400), kv("CDELT1", 2)},
			4000, 5980, spectrum.Vacuum, "unit_assumed medium_assumed"},
		{"no unit, micron", []string{kv("CRVAL1", 1.0), kv("CDELT1", 0.01)},
			10000, 19900, spectrum.Vacuum, "unit_assumed medium_assumed"},
	}
	for _, tt := range tests {
		s := first(t, axisImage(100, append(tt.cards, kv("SPECSYS", "BARYCENT"))...))
		seg := &s.Segments[0]
		near(t, tt.name+": first", seg.Wave[0], tt.first, 1e-12)
		near(t, tt.name+": last", seg.Wave[99], tt.last, 1e-12)
		if s.Medium != tt.medium {
			t.Errorf("%s: medium %v", tt.name, s.Medium)
		}
		got := strings.ReplaceAll(codes(s), "noise_estimated", "")
		if strings.Join(strings.Fields(got), " ") != tt.doubt {
			t.Errorf("%s: doubts %q, want %q", tt.name, got, tt.doubt)
		}
		if isLog := strings.Contains(tt.name, "log"); seg.LogUniform != isLog {
			t.Errorf("%s: LogUniform = %v", tt.name, seg.LogUniform)
		}
	}
}

func TestAxisFromTable(t *testing.T) {
	n := 50
	data := join(
		image(true, -32, []int{n}, noisy(n, 1), kv("CTYPE1", "AWAV-TAB"), kv("CUNIT1", "nm"), kv("CRVAL1", 0), kv("CDELT1", 1),
			kv("PS1_0", "WCS-TABLE"), kv("PS1_1", "COORDS")),
		table("WCS-TABLE", 1, []tcol{{name: "COORDS", form: "50D", unit: "nm", data: ramp(n, 500, 0.3)}}))
	s := first(t, data)
	near(t, "last", s.Segments[0].Wave[n-1], 5147, 1e-12)
	if s.Medium != spectrum.Air {
		t.Errorf("medium %v, want air", s.Medium)
	}
}

// Axes that cannot be computed are errors that say what is missing.
func TestAxisRefused(t *testing.T) {
	for _, cards := range [][]string{
		{kv("CTYPE1", "VOPT"), kv("CRVAL1", 0), kv("CDELT1", 1000)},
		{kv("CTYPE1", "WAVE-GRI"), kv("CRVAL1", 5e-7), kv("CDELT1", 1e-10)},
		{kv("CTYPE1", "WAVE-TAB"), kv("CRVAL1", 5e-7), kv("CDELT1", 1e-10), kv("PS1_0", "NONE")},
		{kv("CTYPE1", "MULTISPE"), kv("CD1_1", 1)},
		{kv("CTYPE1", "RA---TAN"), kv("CRVAL1", 10), kv("CDELT1", 1)},
		{kv("CRVAL1", 5000)},
	} {
		_, err := Open(save(t, axisImage(100, cards...)), Options{})
		if err == nil {
			t.Errorf("%v: no error", cards)
		}
	}
}
