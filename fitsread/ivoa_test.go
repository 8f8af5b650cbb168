package fitsread

import (
	"errors"
	"strings"
	"testing"

	"duskline/spectrum"
)

// classTable is a table with a row a pixel from the given wavelength on, with
// what VOCLASS and other cards say.
func classTable(name string, start float64, names [3]string, cards ...string) []byte {
	const n = 64
	return table(name, n, []tcol{{name: names[0], form: "D", unit: "Angstrom", data: ramp(n, start, 1)},
		{name: names[1], form: "D", data: noisy(n, 1)}, {name: names[2], form: "D", data: constant(n, 2)}}, cards...)
}

// VOCLASS chooses among tables (IVOA Spectrum data model 1.1, keyword of
// DataModel).
func TestVOClass(t *testing.T) {
	plain := [3]string{"WAVE", "FLUX", "ERR"}
	voclass := func(s string) string { return kv("VOCLASS", s) }
	for _, tt := range []struct {
		name    string
		data    []byte
		layout  string
		start   float64
		count   int
		skipped string
	}{
		{"a spectrum by names", join(empty(), classTable("S", 4000, plain, voclass("SPECTRUM 1.00"))), layoutClass, 4000, 1, ""},
		{"in the form of 1.2", join(empty(), classTable("S", 4000, plain, voclass("Spectrum-1.0"))), layoutClass, 4000, 1, ""},
		{"the right one of several", join(empty(), classTable("MODEL", 3000, plain), classTable("LC", 3500, plain, voclass("TIMESERIES 1.0")),
			classTable("S", 4000, plain, voclass("SPECTRUM V2.0"))), layoutClass, 4000, 1,
			"HDU 1 (MODEL): VOCLASS calls another table the spectrum; HDU 2 (LC): VOCLASS says TIMESERIES 1.0, not a spectrum"},
		{"photometry before one that says nothing", join(empty(), classTable("P", 3000, plain, voclass("PHOTOMETRY")), classTable("S", 4000, plain)), layoutNamed, 4000, 1,
			"HDU 1 (P): VOCLASS says PHOTOMETRY, not a spectrum"},
		{"stated for the whole file", join(empty(voclass("SPECTRUM 1.0")), classTable("S", 4000, plain)), layoutClass, 4000, 1, ""},
		{"segments of an SED", join(empty(voclass("SED 1.0")), classTable("P", 3000, plain, kv("VOSEGT", "Photometry")), classTable("S", 4000, plain, kv("VOSEGT", "Spectrum"))),
			layoutClass, 4000, 1, "HDU 1 (P): VOCLASS says Photometry, not a spectrum"},
	} {
		f := open(t, tt.data, Options{})
		s := read(t, f, 0)
		if s.Layout != tt.layout || s.Segments[0].Wave[0] != tt.start || f.Count() != tt.count || strings.Join(f.plan.skipped, "; ") != tt.skipped {
			t.Errorf("%s: layout %s, from %g, %d spectra, skipped %q", tt.name, s.Layout, s.Segments[0].Wave[0], f.Count(), f.plan.skipped)
		}
	}
	for _, class := range []string{"TIMESERIES 1.0", "Photometry-1.0"} {
		_, err := Open(save(t, join(empty(), classTable("LC", 4000, plain, voclass(class)))), Options{})
		var re *ReadError
		if !errors.As(err, &re) || !errors.Is(err, ErrNoSpectrum) || re.HDU != 1 || !strings.Contains(re.Msg, class) || !strings.Contains(re.Msg, "VOCLASS") {
			t.Errorf("%s: %v", class, err)
		}
	}
}

// Spellings of utypes and UCDs: versions 1.0 to 1.2 of the data model, name spaces
// of services, keyword TUTYPEn, and the word phot.fluDens of early UCD1+ lists. The
// last two and Points for Data are from memory.
func TestSpellingsOfTheModel(t *testing.T) {
	const n = 64
	for _, tt := range []struct{ key, wave, flux, err string }{
		{"TUTYP", "Spectrum.Data.SpectralAxis.Value", "Spectrum.Data.FluxAxis.Value", "Spectrum.Data.FluxAxis.Accuracy.StatError"},
		{"TUTYP", "spec:Spectrum.Data.SpectralAxis.Value", "spec:Data.FluxAxis.Value", "sdm:Spectrum.Data.FluxAxis.Accuracy.StatError"},
		{"TUTYPE", "spec:Data.SpectralAxis.Value", "spec:Data.FluxAxis.value", "spec:Data.FluxAxis.Accuracy.StatError"},
		{"TUTYP", "SED.Segment.Points.SpectralCoord.Value", "SED.Segment.Points.Flux.Value", "SED.Segment.Points.Flux.Accuracy.StatError"},
		{"TUCD", "em.wl", "phot.fluDens;em.wl", "stat.error;phot.fluDens;em.wl"},
		{"TUCD", "ivoa:em.wl;obs.atmos", "phot.flux.density;em.wl", "stat.error;phot.flux.density"},
	} {
		cols := []tcol{{name: "A", form: "D", unit: "nm", data: ramp(n, 500, 1), more: []stem{{tt.key, tt.wave}}},
			{name: "B", form: "D", data: noisy(n, 1), more: []stem{{tt.key, tt.flux}}}, {name: "C", form: "D", data: constant(n, 2), more: []stem{{tt.key, tt.err}}}}
		s := first(t, join(empty(), table("", n, cols)))
		if s.Layout != layoutIVOA || s.Segments[0].Wave[0] != 5000 || s.Segments[0].Ivar[3] != 0.25 {
			t.Errorf("%s: layout %s, %g, weight %g", tt.wave, s.Layout, s.Segments[0].Wave[0], s.Segments[0].Ivar[3])
		}
		if want := strings.Contains(tt.wave, "atmos"); (s.Medium == spectrum.Air) != want {
			t.Errorf("%s: %v", tt.wave, s.Medium)
		}
	}
}

// Errors towards lower and higher flux count with their mean.
func TestTwoSidedErrors(t *testing.T) {
	const n = 64
	high := constant(n, 3)
	high[5] = 0
	utype := func(s string) []stem { return []stem{{"TUTYP", "Spectrum.Data." + s}} }
	cols := []tcol{{name: "A", form: "D", unit: "nm", data: ramp(n, 500, 1), more: utype("SpectralAxis.Value")},
		{name: "B", form: "D", data: noisy(n, 1), more: utype("FluxAxis.Value")},
		{name: "C", form: "D", data: constant(n, -1), more: utype("FluxAxis.Accuracy.StatErrLow")},
		{name: "D", form: "D", data: high, more: utype("FluxAxis.Accuracy.StatErrHigh")}}
	path := save(t, join(empty(), table("", n, cols)))
	checkDraft(t, path, Options{})
	f, err := Open(path, Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s := read(t, f, 0)
	if v := s.Segments[0].Ivar; v[0] != 0.25 || v[5] != 1 || s.Has(spectrum.NoiseEstimated) {
		t.Errorf("weights %g and %g, want 1/2^2 and, where only one is there, 1/1^2; %s", v[0], v[5], codes(s))
	}
}

// The resolution of the model is an FWHM in the unit of the axis, that of others
// a power; the header's SPEC_RES likewise.
func TestResolutionOfTheModel(t *testing.T) {
	const n = 64
	for _, tt := range []struct {
		name, unit, utype string
		value, want       float64
	}{
		{"FWHM in the unit of the axis", "", "Spectrum.Data.SpectralAxis.Resolution", 0.25, 2000},
		{"FWHM in its own unit", "Angstrom", "Spectrum.Data.SpectralAxis.Resolution", 2.5, 2000},
		{"a power in its place", "", "Spectrum.Data.SpectralAxis.Resolution", 1800, 1800},
		{"a power", "", "Spectrum.Char.SpectralAxis.ResPower", 0, 0},
	} {
		cols := []tcol{{name: "A", form: "D", unit: "nm", data: ramp(n, 500, 1e-6), more: []stem{{"TUTYP", "Spectrum.Data.SpectralAxis.Value"}}},
			{name: "B", form: "D", data: noisy(n, 1), more: []stem{{"TUTYP", "Spectrum.Data.FluxAxis.Value"}}},
			{name: "R", form: "D", unit: tt.unit, data: constant(n, tt.value), more: []stem{{"TUTYP", tt.utype}}}}
		path := save(t, join(empty(), table("", n, cols)))
		f, err := Open(path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		r := read(t, f, 0).Segments[0].Resolution
		f.Close()
		if tt.want == 0 {
			if len(r) != 0 {
				t.Errorf("%s: %g, want none", tt.name, r[0])
			}
			continue
		}
		checkDraft(t, path, Options{})
		if len(r) != n {
			t.Errorf("%s: no resolution", tt.name)
			continue
		}
		near(t, tt.name, r[0], tt.want, 1e-6) // the axis spans 1e-7 of its value
	}
	for cards, want := range map[string]float64{
		kv("SPEC_RES", 2.5): 0, kv("SPEC_RES", 60): 0, kv("SPEC_RES", 60) + " / resolving power": 60, kv("SPEC_RES", 2000): 2000, kv("SPEC_RP", 60): 60,
	} {
		r := first(t, headerTable(cards)).Segments[0].Resolution
		if len(r) != 0 && r[0] != want || len(r) == 0 && want != 0 {
			t.Errorf("%s: %v, want %g", cards, r, want)
		}
	}
}
