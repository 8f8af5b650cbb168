package spectrum

import (
	"math"
	"testing"
)

// Source: astropy 5.2.1, radial velocity in LSRK and LSRD of a distant source at
// rest in ICRS; ours has the other sign. 2 m/s: astropy adds relativistic terms of
// order v^2/c, below 1.4 m/s, and rounds the apex differently.
func TestRestStandardVelocity(t *testing.T) {
	for _, tt := range []struct{ ra, dec, lsrk, lsrd float64 }{
		{10, 20, 0.86329, -0.30247}, {200, -35, -1.10808, 0.10307}, {83.6, 22, -12.17966, -10.58269},
	} {
		for standard, want := range map[string]float64{"LSRK": -tt.lsrk, "LSRD": -tt.lsrd} {
			if got := RestStandardVelocity(standard, tt.ra, tt.dec); math.Abs(got-want) > 2e-3 {
				t.Errorf("%s at %g %g: %.5f km/s, want %.5f", standard, tt.ra, tt.dec, got, want)
			}
		}
	}
	// By definition: the whole speed at the apex, its opposite behind, nothing across.
	// The center of the Galaxy, l = b = 0, lies at 266.405, -28.936 (same source as galactic).
	for standard, want := range map[string]float64{"GALACTOC": 0, "LOCALGRP": 0} {
		if got := RestStandardVelocity(standard, 266.40499, -28.93617); math.Abs(got-want) > 1e-3 {
			t.Errorf("%s at the center: %g", standard, got)
		}
	}
	// l = 90, b = 0 is 318.004, +48.330.
	if got := RestStandardVelocity("GALACTOC", 318.00438, 48.32964); math.Abs(got+220) > 1e-3 {
		t.Errorf("GALACTOC at its apex: %g", got)
	}
	if !math.IsNaN(RestStandardVelocity("SOURCE", 1, 2)) || !math.IsNaN(RestStandardVelocity("LSRK", math.NaN(), 2)) {
		t.Error("want NaN")
	}
}

func TestOtherFrameToStandard(t *testing.T) {
	s := &Spectrum{Frame: OtherFrame, BaryVelocity: -200, Segments: []Segment{{Wave: []float64{5000}}}}
	s.ToStandard()
	if want := 5000 * (1 - 200/SpeedOfLight); s.Segments[0].Wave[0] != want || s.Frame != Barycentric {
		t.Errorf("%v in %v", s.Segments[0].Wave[0], s.Frame)
	}
	s = &Spectrum{Frame: OtherFrame, BaryVelocity: math.NaN(), Segments: []Segment{{Wave: []float64{5000}}}}
	if s.ToStandard(); !s.Has(FrameUncertain) || s.Frame != OtherFrame {
		t.Error("a frame that cannot be left is not warned of")
	}
}

// Source: astropy 5.2.1, Time('2016-12-31T23:00:00'), an hour before a leap second,
// and Time('2010-03-14T09:00:00'). 1e-4 s is twice the step of a Julian date; TCG
// and TCB are taken for TT by definition of UTC.
func TestUTC(t *testing.T) {
	const before, plain = 2457754.4583222414, 2455269.875 // astropy stretches the day of a leap second: 86401 s
	for scale, jd := range map[string][2]float64{
		"TAI": {2457754.45875, 2455269.8753935187}, "tt": {2457754.4591225, 2455269.8757660184}, "TDB ": {2457754.4591224995, 2455269.8757660366},
	} {
		// The day before a leap second: ours is of even seconds, up to a second away.
		if got, ok := UTC(scale, jd[0]); !ok || math.Abs(got-before)*86400 > 1 {
			t.Errorf("%s: %.9f, want %.9f", scale, got, before)
		}
		if got, ok := UTC(scale, jd[1]); !ok || math.Abs(got-plain)*86400 > 2e-3 {
			t.Errorf("%s: %.9f, want %.9f", scale, got, plain)
		}
	}
	// GPS is 19 s behind TAI by definition.
	if got, _ := UTC("GPS", 2455269.8753935187-19.0/86400); math.Abs(got-plain)*86400 > 1e-4 {
		t.Errorf("GPS: %.9f", got)
	}
	if got, ok := UTC("LOCAL", 2455000); ok || got != 2455000 {
		t.Error("a local scale was taken for UTC")
	}
	if got, ok := UTC("", 2455000); !ok || got != 2455000 {
		t.Error("no scale is UTC")
	}
}
