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
