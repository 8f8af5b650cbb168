package spectrum

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"duskline/internal/checkvalues"

	"pgregory.net/rapid"
)

func TestAirVacuumTable(t *testing.T) {
	// Tolerance: half a unit of the table's last printed digit, and rounding.
	const tol = 0.6e-6
	n := 0
	table := checkvalues.Read(t, "testdata/air_vacuum.csv", 1)
	for row := range table.Len() {
		in, want := table.Number(row, "lambda_in_A"), table.Number(row, "lambda_out_A")
		var got float64
		switch table.Text(row, "direction") {
		case "vac->air":
			got = VacuumToAir(in)
		case "air->vac(exact inverse)":
			got = AirToVacuum(in)
		default:
			t.Fatalf("direction %q", table.Text(row, "direction"))
		}
		n++
		if math.Abs(got-want) > tol {
			t.Errorf("%s %g: %.7f, want %.7f", table.Text(row, "direction"), in, got, want)
		}
	}
	if n < 12 {
		t.Errorf("only %d rows checked", n)
	}
}

func TestAirVacuumRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		wave := rapid.Float64Range(2001, 30000).Draw(t, "wave")
		// 1e-8 Angstrom is the promise of AirToVacuum, 1 mm/s or better.
		if back := AirToVacuum(VacuumToAir(wave)); math.Abs(back-wave) > 1e-8 {
			t.Fatalf("%v came back as %v", wave, back)
		}
	})
	for _, wave := range []float64{912, 1215.67, 1999.999} {
		if AirToVacuum(wave) != wave || VacuumToAir(wave) != wave {
			t.Errorf("%g Angstrom is below the cutoff and was changed", wave)
		}
	}
	if !math.IsNaN(AirToVacuum(math.NaN())) || !math.IsNaN(VacuumToAir(math.NaN())) {
		t.Error("NaN did not give NaN")
	}
}

func TestEarthVelocitySeries(t *testing.T) {
	// Source: ERFA epv00. The fit leaves at most 0.29 m/s in a component at its
	// own dates; these dates were not used.
	const tol = 0.32
	var worst float64
	table := checkvalues.Read(t, "testdata/earth_velocity.csv", 1)
	for row := range table.Len() {
		got := earthVelocity((table.Number(row, "jd_tt") - 2451545) / 36525)
		for i, col := range []string{"vx", "vy", "vz"} {
			d := math.Abs(got[i] - table.Number(row, col))
			worst = max(worst, d)
			if d > tol {
				t.Errorf("JD %s %s: %.3f m/s, want %s", table.Text(row, "jd_tt"), col, got[i], table.Text(row, col))
			}
		}
	}
	t.Logf("largest difference of a component %.3f m/s", worst)
}

func TestBarycentricVelocity(t *testing.T) {
	// Three lists with their own sources in testdata. Tolerance 0.5 m/s: the
	// series (0.3 in a component), nutation and UT1-UTC (0.05 each).
	const tol = 0.5
	for _, list := range []struct{ file, jd, ra, dec, v string }{
		{"barycentric.csv", "jd_utc", "ra_deg_ICRS", "dec_deg_ICRS", "v_bary_m_s_astropy_full"},
		{"barycentric_published_list.csv", "jd_utc", "ra_deg", "dec_deg", "v_bary_m_s_published(Wright & Eastman 2014)"},
		{"barycentric_dates.csv", "jd_utc", "ra_deg", "dec_deg", "v_bary_m_s"},
	} {
		var worst, sum float64
		table := checkvalues.Read(t, "testdata/"+list.file, 1)
		for row := range table.Len() {
			site := Site{table.Number(row, "lon_deg_E"), table.Number(row, "lat_deg"), table.Number(row, "height_m")}
			got := 1000 * BarycentricVelocity(site, table.Number(row, list.jd), table.Number(row, list.ra), table.Number(row, list.dec))
			want := table.Number(row, list.v)
			d := math.Abs(got - want)
			worst, sum = max(worst, d), sum+d*d
			if !(d <= tol) {
				t.Errorf("%s, JD %s, %s %s: %.3f m/s, want %.3f", list.file, table.Text(row, list.jd), table.Text(row, list.ra), table.Text(row, list.dec), got, want)
			}
		}
		t.Logf("%s: %d rows, rms %.3f, largest %.3f m/s", list.file, table.Len(), math.Sqrt(sum/float64(table.Len())), worst)
	}
}

func TestBarycentricVelocityOutside(t *testing.T) {
	site := Site{-111.6, 32, 2000}
	for name, v := range map[string]float64{
		"before 1950":     BarycentricVelocity(site, 2433282, 10, 20),
		"after 2100":      BarycentricVelocity(site, 2488070, 10, 20),
		"date NaN":        BarycentricVelocity(site, math.NaN(), 10, 20),
		"direction NaN":   BarycentricVelocity(site, 2460000, math.NaN(), 20),
		"site NaN":        BarycentricVelocity(Site{LonDeg: math.NaN()}, 2460000, 10, 20),
		"infinite":        BarycentricVelocity(site, 2460000, 10, math.Inf(1)),
		"geocenter, date": GeocenterVelocity(2400000, 10, 20),
	} {
		if !math.IsNaN(v) {
			t.Errorf("%s: %g km/s, want NaN", name, v)
		}
	}
}

func TestGeocenterVelocity(t *testing.T) {
	// The rotation of the Earth is 0.4651 km/s at the equator (WGS84 radius
	// times rotation rate) and adds nothing at a pole.
	const jd, ra, dec = 2460000.3, 77.0, 10.0
	center := GeocenterVelocity(jd, ra, dec)
	pole := BarycentricVelocity(Site{LatDeg: 90}, jd, ra, dec)
	// 0.3 m/s: the Earth's potential, GM/(Rc) = 0.21 m/s.
	if d := math.Abs(pole - center); d > 3e-4 {
		t.Errorf("pole and center differ by %.5f km/s", d)
	}
	var largest float64
	for lon := -180.0; lon < 180; lon++ {
		largest = max(largest, math.Abs(BarycentricVelocity(Site{LonDeg: lon}, jd, ra, dec)-center))
	}
	if want := 0.4651 * math.Cos(dec*math.Pi/180); math.Abs(largest-want) > 1e-3 {
		t.Errorf("rotation adds up to %.4f km/s, want %.4f", largest, want)
	}
}

func TestParseUTC(t *testing.T) {
	// Source: astropy 5.2.1 Time(...).jd, and J2000 and MJD 0 by definition.
	for text, want := range map[string]float64{
		"2000-01-01T12:00:00":       2451545,
		"1858-11-17":                2400000.5,
		"2031-03-14T09:15:26.5":     2462939.8857233794,
		"2031-03-14 09:15:26.5Z":    2462939.8857233794,
		"2016-02-29T09:30:15.5":     2457447.8960127314,
		"2012-06-30T23:59:60":       2456109.5,
		"2031-3-14":                 2462939.5,
		" 14/03/98 ":                2450886.5,
		"1998-03-14T00:00":          2450886.5,
		"2010-06-21T22:00:00.":      2455369.4166666665,
		"1899-12-31T06:00:00.00000": 2415019.75,
	} {
		got, err := ParseUTC(text)
		// 1e-8 day, a millisecond: the float64 step at these dates is 5e-10.
		if err != nil || math.Abs(got-want) > 1e-8 {
			t.Errorf("%q: %.9f, %v; want %.9f", text, got, err, want)
		}
	}
	for _, text := range []string{"", "yesterday", "2031-02-29", "2031-13-01", "31-03-14",
		"2031-03-14T25:00:00", "2031-03-14T10", "2031-03-14T10:00:61", "2031-03-14T10:00:1e1", "2031-03-14T10:00:00.x",
		"14/03/2031", "2031-03-14Tnoon", "2031-03-14T-1:00:00", "20310314", "٢٠٣١-03-14"} {
		if jd, err := ParseUTC(text); err == nil {
			t.Errorf("%q read as %g", text, jd)
		} else if !strings.Contains(err.Error(), strconv.Quote(text)) {
			t.Errorf("%q: error does not quote it: %v", text, err)
		}
	}
	if got := JDToMJD(MJDToJD(58000.25)); got != 58000.25 {
		t.Errorf("MJD came back as %v", got)
	}
}

func TestTerrestrialTime(t *testing.T) {
	// Source: IERS Bulletin C; TT-TAI = 32.184 s by definition.
	for jd, want := range map[float64]float64{
		2440000.5: 42.184, 2444239.5: 51.184, 2451545: 64.184, 2457754.4: 68.184, 2457754.5: 69.184, 2462939.9: 69.184,
	} {
		// 1e-4 s: twice the float64 step of a Julian date.
		if got := (terrestrialTime(jd) - jd) * 86400; math.Abs(got-want) > 1e-4 {
			t.Errorf("JD %.1f: TT-UTC %.4f s, want %.3f", jd, got, want)
		}
	}
}

func FuzzParseUTC(f *testing.F) {
	for _, s := range []string{"2031-03-14T09:15:26.5", "14/03/98", "2012-06-30T23:59:60", "x"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		jd, err := ParseUTC(s)
		// Years 0000 to 9999 of the proleptic Gregorian calendar.
		if err == nil && !(jd >= 1721059.5 && jd <= 5373484.6) {
			t.Errorf("%q gave JD %g", s, jd)
		}
	})
}

func BenchmarkBarycentricVelocity(b *testing.B) {
	site := Site{-111.6, 32, 2000}
	b.ReportAllocs()
	for b.Loop() {
		BarycentricVelocity(site, 2460000, 10, 20)
	}
}
