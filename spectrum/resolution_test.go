package spectrum

import (
	"math"
	"testing"
)

func TestInstrumentSigma(t *testing.T) {
	s := &Spectrum{Segments: []Segment{
		{Wave: []float64{4000, 5000, 6000}, Resolution: []float64{1500, 2000, 2500}},
		{Wave: []float64{5500, 7000}, Resolution: []float64{4000}},
		{Wave: []float64{8000, 9000}},
	}}
	// By definition: R = 2000 is an FWHM of 149.9 km/s, over 2.35482 a sigma of 63.655.
	for wave, r := range map[float64]float64{5000: 2000, 4000: 1500, 3000: 1500, 5800: 4000, 7500: 4000, 4999: 2000} {
		if got, want := s.InstrumentSigma(wave), 63.655*2000/r; math.Abs(got-want) > 1e-3*want {
			t.Errorf("%g Angstrom: %.3f km/s, want %.3f", wave, got, want)
		}
	}
	if !math.IsNaN(s.InstrumentSigma(math.NaN())) || !math.IsNaN((&Spectrum{Segments: s.Segments[2:]}).InstrumentSigma(8500)) {
		t.Error("want NaN where nothing is known")
	}
}

// Redshift and the observer's motion multiply: facts of the trade's own example, z
// = 0.1 seen by an observer who moves at 25 km/s, exact 0.1000917301, while adding
// velocities gives 0.1000833910 (computed from the definition (1+z)(1+v/c)-1). A
// line at 5000 Angstrom must come out with it; 1e-10 is the last printed digit.
func TestVelocitiesMultiply(t *testing.T) {
	const rest, z, v = 5000.0, 0.1, 25.0
	s := &Spectrum{Frame: Topocentric, BaryVelocity: v, Segments: []Segment{{Wave: []float64{rest * (1 + z)}}}}
	s.ToStandard()
	if got := s.Segments[0].Wave[0]/rest - 1; math.Abs(got-0.1000917301) > 1e-10 {
		t.Errorf("z = %.10f, want 0.1000917301", got)
	}
}
