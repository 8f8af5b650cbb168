package fitsread

import (
	"math"
	"strings"
	"testing"

	"duskline/spectrum"
)

// The worked example of FITS Paper III, section 10.1: a topocentric frequency axis
// whose alternate description Z is barycentric, with the observer's velocity. The
// reference frequency in the barycenter is printed there too. 26108 m/s is rounded to
// 1 m/s, 3.3e-9 of the wavelength.
func TestObserverOfPaperIII(t *testing.T) {
	s := first(t, image(true, -64, []int{64}, noisy(64, 1), kv("CTYPE1", "FREQ"), kv("CRVAL1", 1.37835117405e9), kv("CDELT1", 9.765625e4), kv("CRPIX1", 32.0),
		kv("CUNIT1", "Hz"), kv("RESTFRQ", 1.420405752e9), kv("SPECSYS", "TOPOCENT"), kv("CTYPE1Z", "VOPT-F2W"), kv("CRVAL1Z", 9.120e6), kv("CDELT1Z", -2.1882651e4),
		kv("CRPIX1Z", 32.0), kv("CUNIT1Z", "m/s"), kv("RESTWAVZ", 0.211061139), kv("SPECSYSZ", "BARYCENT"), kv("SSYSOBSZ", "TOPOCENT"), kv("VELOSYSZ", 26108.0)))
	if s.Frame != spectrum.Topocentric || s.Has(spectrum.FrameAssumed) || s.Has(spectrum.FrameUncertain) {
		t.Fatalf("%v, %s", s.Frame, codes(s))
	}
	s.ToStandard()
	near(t, "barycentric wavelength of the reference pixel", s.Segments[0].Wave[64-32], 299792458/1.37847121643e9*1e10, 3.3e-9)
}

// What VELOSYS is good for: it corrects where time, place or direction are
// missing, and is held against them where they are there. Source of the values:
// astropy 5.2.1, SpectralCoord, of the site, time and direction of siteAndTime:
// topocentric to ICRS 25.59278 km/s, to LSRK 7.54264 km/s.
func TestObserverVelocity(t *testing.T) {
	const bary, lsrk = 25.59278, 7.54264
	velosys := func(toStandard float64) float64 { // in m/s, the other way, relativistic
		f := 1 + toStandard/spectrum.SpeedOfLight
		return -lightSpeed * (f*f - 1) / (f*f + 1)
	}
	direction := []string{kv("RA", 83.8220833), kv("DEC", -5.3911111)}
	with := func(base []string, more ...string) []string { return append(append([]string{}, base...), more...) }
	for _, tt := range []struct {
		name  string
		cards []string
		frame spectrum.Frame
		want  float64 // km/s, NaN for none
		doubt string
	}{
		{"nothing but the alternate description", []string{kv("SPECSYS", "TOPOCENT"), kv("SPECSYSB", "BARYCENT"), kv("VELOSYSB", velosys(bary))}, spectrum.Topocentric, bary, ""},
		{"of LSRK, with a direction", with(direction, kv("SPECSYS", "TOPOCENT"), kv("SPECSYSL", "LSRK"), kv("VELOSYSL", velosys(lsrk))), spectrum.Topocentric, bary, ""},
		{"of LSRK, without", []string{kv("SPECSYS", "TOPOCENT"), kv("SPECSYSL", "LSRK"), kv("VELOSYSL", velosys(lsrk))}, spectrum.Topocentric, math.NaN(), ""},
		{"of no standard", []string{kv("SPECSYS", "TOPOCENT"), kv("VELOSYS", velosys(bary))}, spectrum.Topocentric, bary, "without a standard of rest"},
		{"zero", []string{kv("SPECSYS", "TOPOCENT"), kv("VELOSYS", 0.0)}, spectrum.Topocentric, math.NaN(), ""},
		{"agrees with time and place", with(siteAndTime, kv("SPECSYS", "TOPOCENT"), kv("SPECSYSB", "BARYCENT"), kv("VELOSYSB", velosys(bary))), spectrum.Topocentric, bary, ""},
		{"of the wrong sign", with(siteAndTime, kv("SPECSYS", "TOPOCENT"), kv("SPECSYSB", "BARYCENT"), kv("VELOSYSB", -velosys(bary))), spectrum.Topocentric, bary, "VELOSYSB makes"},
		{"corrected, agrees", with(siteAndTime, kv("SPECSYS", "BARYCENT"), kv("VELOSYS", velosys(bary))), spectrum.Barycentric, math.NaN(), ""},
		{"corrected by the wrong sign", with(siteAndTime, kv("SPECSYS", "BARYCENT"), kv("VELOSYS", -velosys(bary))), spectrum.Barycentric, math.NaN(), "VELOSYS makes"},
		{"in LSRK", with(direction, kv("SPECSYS", "LSRK")), spectrum.OtherFrame, 18.04968, ""},
		{"in LSRK, agrees", with(siteAndTime, kv("SPECSYS", "LSRK"), kv("VELOSYS", velosys(lsrk))), spectrum.OtherFrame, 18.04968, ""},
		{"in the long names of the data model", with(direction, kv("SPECSYS", "TOPOCENTER")), spectrum.Topocentric, math.NaN(), ""},
	} {
		s := first(t, headerTable(tt.cards...))
		// 6 m/s: what astropy's SpectralCoord leaves out, the potentials of Sun and Earth,
		// and the rounding of the apex of LSRK.
		if s.Frame != tt.frame || math.IsNaN(s.BaryVelocity) != math.IsNaN(tt.want) || math.Abs(s.BaryVelocity-tt.want) > 6e-3 {
			t.Errorf("%s: %v, %g km/s, want %g", tt.name, s.Frame, s.BaryVelocity, tt.want)
		}
		text := ""
		for _, w := range s.Warnings {
			if w.Code == spectrum.FrameUncertain {
				text = w.Text
			}
		}
		if (text == "") != (tt.doubt == "") || !strings.Contains(text, tt.doubt) {
			t.Errorf("%s: doubt %q, want %q", tt.name, text, tt.doubt)
		}
	}
}

// SSYSOBS speaks of the planes of a cube and SSYSSRC of ZSOURCE, and a redshift in
// the header is never used: none of them changes a spectrum.
func TestCardsWithoutEffect(t *testing.T) {
	for _, system := range []string{"BARYCENT", "SOURCE"} {
		plain := first(t, headerTable(kv("SPECSYS", system)))
		s := first(t, headerTable(kv("SPECSYS", system), kv("SSYSOBS", "TOPOCENT"), kv("ZSOURCE", 0.7), kv("SSYSSRC", "LSRK")))
		if s.Frame != plain.Frame || s.Segments[0].Wave[5] != plain.Segments[0].Wave[5] || codes(s) != codes(plain) {
			t.Errorf("%s: %v, %s", system, s.Frame, codes(s))
		}
		if system == "SOURCE" && (!s.Has(spectrum.RestFrameStated) || s.Frame != spectrum.RestFrame) {
			t.Errorf("%v, %s", s.Frame, codes(s))
		}
	}
	s := first(t, headerTable(kv("REST_Z", 0.7)))
	if s.Frame != spectrum.RestFrame || !s.Has(spectrum.RestFrameStated) {
		t.Errorf("REST_Z: %v, %s", s.Frame, codes(s))
	}
	if s = first(t, headerTable(kv("REST_Z", 0.0))); s.Frame == spectrum.RestFrame {
		t.Error("REST_Z = 0 is the default: nothing was taken out")
	}
}

// Without SPECSYS a table of the data model is topocentric, its default, where a
// time is known, and said to be assumed so.
func TestFrameOfTheModel(t *testing.T) {
	when := []string{kv("TMID", 56200.1356481), kv("RA", 83.8220833), kv("DEC", -5.3911111)}
	s := first(t, headerTable(append(when, kv("VOCLASS", "SPECTRUM 1.0"))...))
	if s.Frame != spectrum.Topocentric || !s.Has(spectrum.FrameAssumed) || math.Abs(s.BaryVelocity-25.59278) > 0.47 {
		t.Errorf("%v, %g, %s", s.Frame, s.BaryVelocity, codes(s))
	}
	if s = first(t, headerTable(when...)); s.Frame != spectrum.Barycentric {
		t.Errorf("without VOCLASS: %v", s.Frame)
	}
}
