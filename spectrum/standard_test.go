package spectrum

import (
	"math"
	"reflect"
	"testing"
)

func lineSpectrum(medium Medium, frame Frame, v float64) *Spectrum {
	wave := []float64{4000, 5000, 6562.8, 9000}
	seg := Segment{Wave: wave, Flux: make([]float64, 4), Ivar: make([]float64, 4), LogUniform: true}
	return &Spectrum{Segments: []Segment{seg, seg}, Medium: medium, Frame: frame, BaryVelocity: v}
}

func TestToStandard(t *testing.T) {
	in := []float64{4000, 5000, 6562.8, 9000}
	nan := math.NaN()
	for _, c := range []struct {
		name    string
		medium  Medium
		frame   Frame
		v       float64
		shift   float64 // km/s that must have been applied
		end     Frame
		warning Code
	}{
		{"vacuum, barycentric", Vacuum, Barycentric, 25, 0, Barycentric, ""},
		{"vacuum, topocentric", Vacuum, Topocentric, 25, 25, Barycentric, ""},
		{"air, topocentric", Air, Topocentric, -25, -25, Barycentric, ""},
		{"air, geocentric", Air, Geocentric, 12, 12, Barycentric, ""},
		{"velocity zero", Vacuum, Topocentric, 0, 0, Barycentric, ""},
		{"air, barycentric", Air, Barycentric, nan, 0, Barycentric, ""},
		{"heliocentric kept", Vacuum, Heliocentric, 25, 0, Heliocentric, ""},
		{"rest frame kept", Air, RestFrame, 25, 0, RestFrame, ""},
		{"other standard of rest", Vacuum, OtherFrame, -200, -200, Barycentric, ""},
		{"other standard without velocity", Vacuum, OtherFrame, nan, 0, OtherFrame, FrameUncertain},
		{"no velocity", Air, Topocentric, nan, 0, Topocentric, FrameAssumed},
		{"absurd velocity", Vacuum, Topocentric, 3000, 0, Topocentric, FrameUncertain},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := lineSpectrum(c.medium, c.frame, c.v)
			shared := s.Segments[0].Wave
			s.ToStandard()
			for _, seg := range s.Segments {
				for i, w := range seg.Wave {
					want := in[i]
					if c.medium == Air {
						want = AirToVacuum(want)
					}
					want *= 1 + c.shift/299792.458
					if math.Abs(w-want) > 1e-9 { // rounding of float64 at 9000
						t.Errorf("%g Angstrom became %.9f, want %.9f", in[i], w, want)
					}
				}
				if seg.LogUniform != (c.medium == Vacuum) {
					t.Errorf("LogUniform is %v", seg.LogUniform)
				}
			}
			if !reflect.DeepEqual(shared, in) {
				t.Error("a wavelength slice that arms share was overwritten")
			}
			if s.Medium != Vacuum || s.Frame != c.end {
				t.Errorf("ended in %v, %v", s.Medium, s.Frame)
			}
			if got := len(s.Warnings) > 0; got != (c.warning != "") || got && s.Warnings[0].Code != c.warning {
				t.Errorf("warnings %v, want %q", s.Warnings, c.warning)
			}
			once := append([]float64(nil), s.Segments[1].Wave...)
			s.ToStandard()
			if !reflect.DeepEqual(once, s.Segments[1].Wave) || s.Frame != c.end || len(s.Warnings) > 1 {
				t.Error("a second call changed the spectrum")
			}
		})
	}
}

// The factors multiply: CHECKS trap 8, z = 0.1 seen at 25 km/s.
func TestFactorsMultiply(t *testing.T) {
	const rest, z = 5000.0, 0.1
	s := lineSpectrum(Vacuum, Topocentric, 25)
	s.Segments[0].Wave = []float64{rest * (1 + z), 9000, 9100, 9200}
	s.ToStandard()
	// Source: (1+0.1)(1+25/c)-1 computed with mpmath; 1e-10 is its last digit.
	if got := s.Segments[0].Wave[0]/rest - 1; math.Abs(got-0.1000917301) > 1e-10 {
		t.Errorf("z = %.10f, want 0.1000917301", got)
	}
}
