package fitsread

import (
	"math"
	"testing"

	"duskline/spectrum"
)

func headerTable(cards ...string) []byte {
	n := 64
	return join(empty(cards...), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)},
		{name: "FLUX", form: "D", data: noisy(n, 1)}, {name: "ERR", form: "D", data: constant(n, 1)}}))
}

var (
	siteAndTime = []string{kv("SITELONG", -70.404167), kv("SITELAT", -24.627222), kv("SITEALT", 2635.0),
		kv("DATE-OBS", "2012-09-30T02:45:20"), kv("EXPTIME", 3600.0), kv("RA", "05:35:17.3"), kv("DEC", "-05:23:28.0")}
	noDoubt = spectrum.Code("")
)

// What headers say on the velocity frame, and what is assumed when they do not.
func TestFrames(t *testing.T) {
	tests := []struct {
		name     string
		cards    []string
		frame    spectrum.Frame
		doubt    spectrum.Code
		velocity bool
	}{
		{"SPECSYS", []string{kv("SPECSYS", "TOPOCENT")}, spectrum.Topocentric, noDoubt, false},
		{"SPECSYS in long form", []string{kv("SPECSYS", "Heliocentric")}, spectrum.Heliocentric, noDoubt, false},
		{"SPECSYS goes before cards", append([]string{kv("SPECSYS", "BARYCENT"), kv("HELIO", false)}, siteAndTime...), spectrum.Barycentric, noDoubt, false},
		{"source", []string{kv("SPECSYS", "SOURCE")}, spectrum.RestFrame, spectrum.RestFrameStated, false},
		{"made, by its comment", []string{kv("HELIO_RV", 13.9) + " / Heliocentric correction (added to velocities)"}, spectrum.Heliocentric, noDoubt, false},
		{"made, by a logical", []string{kv("HELIO", true), kv("HELIO_RV", -26.4)}, spectrum.Heliocentric, noDoubt, false},
		{"made, never twice", append([]string{kv("HELCORR", "COMPLETE"), kv("V_HELIO", -22.3)}, siteAndTime...), spectrum.Heliocentric, noDoubt, false},
		{"bare number", []string{kv("BERV", 7.1)}, spectrum.Barycentric, spectrum.FrameUncertain, false},
		{"not made", append([]string{kv("HELCORR", "OMIT")}, siteAndTime...), spectrum.Topocentric, noDoubt, true},
		{"to be applied", []string{kv("BARYCORR", 7.1) + " / km/s, to be applied"}, spectrum.Topocentric, noDoubt, true},
		{"words", []string{"HISTORY spectrum shifted to heliocentric frame"}, spectrum.Heliocentric, spectrum.FrameUncertain, false},
		{"words of denial", []string{"COMMENT heliocentric correction not applied"}, spectrum.Barycentric, spectrum.FrameAssumed, false},
		{"rest in words", []string{"COMMENT shifted to the rest frame with z of the survey"}, spectrum.RestFrame, spectrum.RestFrameStated, false},
		{"single exposure from the ground", siteAndTime, spectrum.Topocentric, spectrum.FrameAssumed, true},
		{"nothing", nil, spectrum.Barycentric, spectrum.FrameAssumed, false},
	}
	for _, tt := range tests {
		s := first(t, headerTable(tt.cards...))
		if s.Frame != tt.frame || !math.IsNaN(s.BaryVelocity) != tt.velocity {
			t.Errorf("%s: %v, velocity %g", tt.name, s.Frame, s.BaryVelocity)
		}
		for _, c := range []spectrum.Code{spectrum.FrameAssumed, spectrum.FrameUncertain, spectrum.RestFrameStated} {
			if s.Has(c) != (c == tt.doubt) {
				t.Errorf("%s: doubts %s, want %q", tt.name, codes(s), tt.doubt)
			}
		}
	}
	// The header above is one of the cases of facts/barycentric.csv (astropy 5.2
	// with ERFA): 25,596.382 m/s at 2012-09-30T03:15:20, the middle of the exposure,
	// towards 83.8220833, -5.3911111. The position here is rounded to 0.1 s and 1";
	// the series of package spectrum is good to 1 m/s: 5 m/s.
	s := first(t, headerTable(append([]string{kv("HELIO", false)}, siteAndTime...)...))
	near(t, "barycentric velocity", s.BaryVelocity, 25.596382, 0.005/25.6)
	s = first(t, headerTable(kv("BARYCORR", 7.1)+" / km/s, to be applied"))
	near(t, "stated velocity", s.BaryVelocity, 7.1, 1e-15)
}

func TestMedia(t *testing.T) {
	ground := []string{kv("AIRMASS", 1.2)}
	tests := []struct {
		name  string
		cards []string
		want  spectrum.Medium
		doubt bool
	}{
		{"VACUUM = T", []string{kv("VACUUM", true)}, spectrum.Vacuum, false},
		{"VACUUM = F", []string{kv("VACUUM", false)}, spectrum.Air, false},
		{"AIRORVAC", []string{kv("AIRORVAC", "air")}, spectrum.Air, false},
		{"remark on vacuum", []string{"HISTORY  All wavelengths are in vacuum."}, spectrum.Vacuum, false},
		{"remark on air", []string{"COMMENT wavelengths in air, from arc lamps"}, spectrum.Air, false},
		{"airmass is no air", []string{"COMMENT mean wavelength shift with airmass"}, spectrum.Vacuum, true},
		{"contradiction", []string{"COMMENT wavelengths in air", "COMMENT wavelengths in vacuum"}, spectrum.Vacuum, true},
		{"from the ground, linear", ground, spectrum.Air, true},
		{"nothing", nil, spectrum.Vacuum, true},
	}
	for _, tt := range tests {
		s := first(t, headerTable(tt.cards...))
		if s.Medium != tt.want || s.Has(spectrum.MediumAssumed) != tt.doubt {
			t.Errorf("%s: %v, %s", tt.name, s.Medium, codes(s))
		}
	}
	s := first(t, axisImage(100, append(ground, logAxis...)...))
	if s.Medium != spectrum.Vacuum || !s.Has(spectrum.MediumAssumed) {
		t.Errorf("log grid from the ground: %v, %s", s.Medium, codes(s))
	}
	n := 64
	for name, want := range map[string]spectrum.Medium{"WAVE_AIR": spectrum.Air, "lambda_vac": spectrum.Vacuum} {
		s := first(t, join(empty(), table("", n, []tcol{{name: name, form: "D", unit: "nm", data: ramp(n, 400, 1)}, {name: "FLUX", form: "D", data: noisy(n, 1)}})))
		if s.Medium != want || s.Has(spectrum.MediumAssumed) {
			t.Errorf("%s: %v, %s", name, s.Medium, codes(s))
		}
	}
}

func TestPositions(t *testing.T) {
	tests := []struct {
		name    string
		cards   []string
		ra, dec float64
	}{
		{"degrees", []string{kv("RA", 150.5), kv("DEC", -2.25)}, 150.5, -2.25},
		{"sexagesimal", []string{kv("RA", "10:02:00.0"), kv("DEC", "-00:30:00")}, 150.5, -0.5},
		{"blanks", []string{kv("RA", "10 02 00"), kv("DEC", "+2 15 00")}, 150.5, 2.25},
		{"hours by the comment", []string{kv("RA", 10.0) + " / RA of catalog, float hours", kv("DEC", 1.0)}, 150, 1},
		{"object before telescope", []string{kv("RA", 1.0), kv("DEC", 1.0), kv("PLUG_RA", 2.0), kv("PLUG_DEC", 3.0)}, 2, 3},
		{"unfilled", []string{kv("RA", 0.0), kv("DEC", 0.0)}, math.NaN(), math.NaN()},
		{"nonsense", []string{kv("RA", 999.0), kv("DEC", "abc")}, math.NaN(), math.NaN()},
	}
	for _, tt := range tests {
		s := first(t, headerTable(tt.cards...))
		if math.IsNaN(tt.ra) {
			if !math.IsNaN(s.RA) || !math.IsNaN(s.Dec) {
				t.Errorf("%s: %g %g", tt.name, s.RA, s.Dec)
			}
			continue
		}
		near(t, tt.name+" ra", s.RA, tt.ra, 1e-14)
		near(t, tt.name+" dec", s.Dec, tt.dec, 1e-14)
	}
}

// Precession from B1950: the J2000 position of a point at (10h, +20 deg) by the
// rigorous method with the same angles; an inverse applied by rotating forward
// must return, and the shift of the equinox at ra = dec = 0 is m and n of general
// precession (46.12" and 20.04" a year in 2000, from memory): 50 years are 0.6406
// and 0.2784 degrees, good to 1e-3.
func TestPrecession(t *testing.T) {
	ra, dec := toJ2000(0.0001, 0, 1950)
	near(t, "m", ra, 0.6406+0.0001, 2e-3)
	near(t, "n", dec, 0.2784, 2e-3)
	ra, dec = toJ2000(150, 20, 2000)
	if ra != 150 || dec != 20 {
		t.Errorf("J2000 moves to %g %g", ra, dec)
	}
}

// Geocentric coordinates of a site and back, by the closed forward formula of
// the WGS84 ellipsoid.
func TestGeodetic(t *testing.T) {
	const lon, lat, height = -70.404167, -24.627222, 2635.0
	const a, f = 6378137.0, 1 / 298.257223563
	s, c := math.Sincos(lat * math.Pi / 180)
	n := a / math.Sqrt(1-f*(2-f)*s*s)
	sl, cl := math.Sincos(lon * math.Pi / 180)
	got := geodetic((n+height)*c*cl, (n+height)*c*sl, (n*(1-f)*(1-f)+height)*s)
	near(t, "longitude", got.LonDeg, lon, 1e-12)
	near(t, "latitude", got.LatDeg, lat, 1e-10)
	near(t, "height", got.HeightM, height, 1e-6)
}

// Cards from which the middle of the exposure comes; 2031-03-14T09:00 is JD
// 2462939.875 (day count from J2000.0 = 2451545.0, Meeus 1998).
func TestMidExposure(t *testing.T) {
	const nine = 2462939.875
	for name, cards := range map[string][]string{
		"date with time":  {kv("DATE-OBS", "2031-03-14T08:30:00"), kv("EXPTIME", 3600)},
		"date and clock":  {kv("DATE-OBS", "2031-03-14"), kv("UT", "08:30:00"), kv("EXPTIME", 3600)},
		"start and end":   {kv("MJD-OBS", nine-2400000.5-0.02), kv("MJD-END", nine-2400000.5+0.02)},
		"the middle":      {kv("DATE-AVG", "2031-03-14T09:00:00"), kv("MJD-OBS", 50000.3)},
		"number in words": {kv("MJD-OBS", "62939.354166666667"), kv("EXPTIME", 3600)},
		"dates of both":   {kv("DATE-BEG", "2031-03-14T08:30:00"), kv("DATE-END", "2031-03-14T09:30:00")},
		// TAI-UTC is 37 s since 2017, TT-TAI 32.184 s (IERS Bulletin C; definition).
		"atomic time":      {kv("TIMESYS", "TAI"), kv("DATE-AVG", "2031-03-14T09:00:37")},
		"dynamical time":   {kv("TIMESYS", "TDB"), kv("DATE-AVG", "2031-03-14T09:01:09.184")},
		"terrestrial time": {kv("TIMESYS", "TT"), kv("DATE-OBS", "2031-03-14T08:31:09.184"), kv("EXPTIME", 3600)},
	} {
		h := parseHeader(string(block(cards...)))
		if got := midExposure([]*hdu{{header: h}}); math.Abs(got-nine) > 1e-6 {
			t.Errorf("%s: %.6f, want %.6f", name, got, nine)
		}
	}
	for name, cards := range map[string][]string{
		"a date without time": {kv("DATE-OBS", "2031-03-14"), kv("MJD", 62939)},
		"several nights":      {kv("MJD-OBS", nine-2400000.5), kv("MJD-END", nine-2400000.5+4), kv("EXPTIME", 3600)},
		"a local clock":       {kv("DATE-AVG", "2031-03-14T09:00:00"), kv("TIMESYS", "LOCAL")},
	} {
		h := parseHeader(string(block(cards...)))
		if got := midExposure([]*hdu{{header: h}}); !math.IsNaN(got) {
			t.Errorf("%s gives %g", name, got)
		}
	}
}

// Another standard of rest is corrected by the Sun's motion, and the card of an
// alternate axis that is in use counts before the primary one.
func TestStandardOfRest(t *testing.T) {
	n := 64
	cards := append([]string{kv("SPECSYS", "LSRK"), kv("RA", 83.6), kv("DEC", 22.0)}, logAxis...)
	s := first(t, image(true, -32, []int{n}, noisy(n, 1), cards...))
	// astropy 5.2.1, LSRK: 12.1797 km/s for this direction, see package spectrum.
	if s.Frame != spectrum.OtherFrame || math.Abs(s.BaryVelocity-12.1797) > 2e-3 {
		t.Errorf("%v, %.4f km/s", s.Frame, s.BaryVelocity)
	}
	s = first(t, image(true, -32, []int{n}, noisy(n, 1), kv("CTYPE1", "PIXEL"), kv("CRVAL1", 1), kv("CDELT1", 1), kv("SPECSYS", "TOPOCENT"),
		kv("CTYPE1B", "AWAV"), kv("CUNIT1B", "nm"), kv("CRVAL1B", 500), kv("CDELT1B", 0.1), kv("CRPIX1B", 1), kv("SPECSYSB", "BARYCENT")))
	if s.Frame != spectrum.Barycentric || s.Medium != spectrum.Air || s.Segments[0].Wave[1] != 5001 {
		t.Errorf("%v, %v, %v", s.Frame, s.Medium, s.Segments[0].Wave[1])
	}
}
