package fitsread

import (
	"errors"
	"strings"
	"testing"

	"duskline/spectrum"
)

// Cards as the FITS standard 4.0 (section 4) and its long-string and hierarchical
// conventions write them, and as careless programs do.
func TestCards(t *testing.T) {
	h := parseHeader(string(block(
		"NAME    = 'O''Brien''s  '      / quotes inside",
		"EMPTY   = ''",
		"BLANK   =                      / no value",
		"NUMBER  =              1.5D-03 / with a D",
		"QUOTED  = '42.5    '",
		"NOTANUM =                  NaN",
		"LOG     =                    T",
		"WORD    = 'yes'",
		"HIERARCH ESO TEL GEOLON = -70.4 / long name",
		"LONG    = 'first, &'",
		"CONTINUE  'second, &'",
		"CONTINUE  'third'  / end",
		"name2   = 7",
		"COMMENT = this is no value",
		"TWICE   = 1",
		"TWICE   = 2",
	)))
	for key, want := range map[string]string{"NAME": "O'Brien's", "EMPTY": "", "BLANK": "", "LONG": "first, second, third", "NAME2": "7", "NONE": "", "TWICE": "1"} {
		if got := h.text(key); got != want {
			t.Errorf("%s = %q, want %q", key, got, want)
		}
	}
	for key, want := range map[string]float64{"NUMBER": 0.0015, "QUOTED": 42.5, "ESO TEL GEOLON": -70.4} {
		if got, ok := h.number(key); !ok || got != want {
			t.Errorf("%s = %g, %v, want %g", key, got, ok, want)
		}
	}
	for _, key := range []string{"NOTANUM", "NAME", "BLANK", "NONE", "COMMENT"} {
		if got, ok := h.number(key); ok {
			t.Errorf("%s is no number and reads as %g", key, got)
		}
	}
	if v, ok := h.logical("LOG"); !v || !ok {
		t.Error("T is false")
	}
	if v, ok := h.logical("WORD"); !v || !ok {
		t.Error("yes is false")
	}
	if c, _ := h.find("NAME"); c.comment() != "quotes inside" {
		t.Errorf("comment %q", c.comment())
	}
}

// The rules of the error messages: one line, the place, what to do.
func TestErrorText(t *testing.T) {
	err := named(fault(ErrBadData, 2, "do this", "what is %s", "wrong").at("FLUX", 3), "a.fits")
	if got, want := err.Error(), "a.fits: HDU 2, column FLUX, row 3: what is wrong; do this"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
	if !errors.Is(err, ErrBadData) {
		t.Error("the kind is lost")
	}
	err = named(errors.New("odd"), "b.fits")
	if !strings.HasPrefix(err.Error(), "b.fits: odd") {
		t.Errorf("%q", err)
	}
}

// Names of arms and versions are read off extension names.
func TestSplitArm(t *testing.T) {
	for name, want := range map[string][2]string{
		"Horne-B": {"horne", "B"}, "R_SCI": {"sci", "R"}, "BLUE": {"", "BLUE"}, "COADD": {"coadd", ""},
		"Bxspf-NL-R": {"bxspf-nl", "R"}, "": {"", ""}, "UVB": {"", "UVB"}, "B2-0001-0002": {"b2-0001-0002", ""},
	} {
		if base, arm := splitArm(name); base != want[0] || arm != want[1] {
			t.Errorf("%q: base %q, arm %q", name, base, arm)
		}
	}
}

func TestUnits(t *testing.T) {
	for s, want := range map[string]spectralUnit{
		"Angstroms": unitAngstrom, "ANGSTROM": unitAngstrom, "0.1 nm": unitAngstrom, "nm": {wavelength, 1e-9, linear},
		"microns": {wavelength, 1e-6, linear}, "log10(Angstrom)": {wavelength, angstrom, log10}, "dex(nm)": {wavelength, 1e-9, log10},
		"ln(Angstrom)": {wavelength, angstrom, ln}, "cm^-1": {wavenumber, 100, linear}, "keV": {energy, 1000 * joulePerEV, linear},
		"10**(-10) m": unitAngstrom, "10^-8m": {wavelength, 1e-8, linear}, "10+9 Hz": {frequency, 1e9, linear},
		"GHz": {frequency, 1e9, linear}, "km/s": {apparentSpeed, 1000, linear}, "log": {wavelength, angstrom, log10},
	} {
		if got, ok := parseUnit(s); !ok || got != want {
			t.Errorf("%q: %+v, %v", s, got, ok)
		}
	}
	for _, s := range []string{"", "counts", "pixel", "erg/s/cm2/Angstrom", "10**(-17) erg/s/cm2/Angstrom", "10**99 m", "109 Hz"} {
		if u, ok := parseUnit(s); ok {
			t.Errorf("%q reads as %+v", s, u)
		}
	}
}

// Wavelengths outside the table of vector cells: an image, or the table's header.
func TestWaveElsewhere(t *testing.T) {
	n := 40
	cells := func(cards ...string) []byte {
		return table("DATA", 2, []tcol{{name: "FLUX", form: "40E", data: noisy(2*n, 1)}}, cards...)
	}
	s := first(t, join(empty(), cells(), image(false, -64, []int{n}, ramp(n, 500, 1), kv("EXTNAME", "WAVELENGTH"), kv("BUNIT", "nm"))))
	near(t, "image", s.Segments[0].Wave[0], 5000, 1e-14)
	s = first(t, join(empty(), cells(kv("CTYPE1", "WAVE"), kv("CUNIT1", "nm"), kv("CRVAL1", 600), kv("CDELT1", 1), kv("CRPIX1", 1))))
	near(t, "cards", s.Segments[0].Wave[1], 6010, 1e-14)
	for _, tt := range []struct {
		name, unit            string
		start, step, shortest float64
	}{{"FREQ", "THz", 501, 1, 2997924.58 / 540}, {"ENERGY", "eV", 2, 0.01, 12398.419843320026 / 2.39}} { // h c / e of the SI of 2019
		s = first(t, join(empty(), table("", n, []tcol{{name: tt.name, form: "D", unit: tt.unit, data: ramp(n, tt.start, tt.step)},
			{name: "FLUX", form: "E", data: noisy(n, 1)}})))
		near(t, tt.name, s.Segments[0].Wave[0], tt.shortest, 1e-12)
		if s.Medium != spectrum.Vacuum || s.Has(spectrum.MediumAssumed) {
			t.Errorf("%s: %v, %s", tt.name, s.Medium, codes(s))
		}
	}
}

// Targets whose table gives positions of an older equinox in the header.
func TestEquinox(t *testing.T) {
	for _, cards := range [][]string{{kv("EQUINOX", 1950.0)}, {kv("EQUINOX", "B1950")}, {kv("RADESYS", "FK4")}} {
		s := first(t, headerTable(append(cards, kv("RA", 0.0001), kv("DEC", 0.0))...))
		near(t, "ra", s.RA, 0.6407, 2e-3)
	}
}

func TestLastOfSeveral(t *testing.T) {
	n := 64
	var data [][]byte
	for _, name := range []string{"LR-001", "LR-002", "LR-003"} {
		data = append(data, table(name, n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400+float64(len(data)), 1)}, {name: "FLUX", form: "E", data: noisy(n, 1)}}))
	}
	f := open(t, join(empty(), join(data...)), Options{})
	near(t, "third", read(t, f, 2).Segments[0].Wave[0], 4020, 1e-14)
}
