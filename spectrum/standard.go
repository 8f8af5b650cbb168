package spectrum

import "math"

// maxObserverSpeed in km/s bounds the barycentric velocity of an observer on or
// near the Earth: 30.3 of the orbit and 0.5 of the rotation, with some room for
// a low orbit. Anything above is not a velocity of an observer.
const maxObserverSpeed = 40.0

// maxStandardSpeed in km/s bounds the Sun's motion in a standard of rest.
const maxStandardSpeed = 600.0

// ToStandard brings the wavelengths to vacuum and to the barycenter: air
// wavelengths by AirToVacuum, in the frame in which they are stated, then
// topocentric and geocentric ones, and those in another standard of rest whose
// BaryVelocity is known, times (1 + BaryVelocity/c). It sets Medium and
// Frame, so that a second call changes nothing.
//
// Heliocentric wavelengths stay as they are, 14 m/s or less from barycentric;
// so do those at rest with the source. Topocentric or
// geocentric ones without BaryVelocity stay too, with the warning FrameAssumed;
// with one that no observer near the Earth can have, with FrameUncertain.
//
// Segments get new Wave slices: arms may share one. A segment that was air is no
// longer LogUniform.
func (s *Spectrum) ToStandard() {
	factor, corrected := s.frameFactor()
	if s.Medium == Vacuum && !corrected {
		return
	}
	for k := range s.Segments {
		seg := &s.Segments[k]
		wave := make([]float64, len(seg.Wave))
		for i, w := range seg.Wave {
			if s.Medium == Air {
				w = AirToVacuum(w)
			}
			wave[i] = w * factor
		}
		seg.Wave = wave
		seg.LogUniform = seg.LogUniform && s.Medium == Vacuum
	}
	s.Medium = Vacuum
	if corrected {
		s.Frame = Barycentric
	}
}

// frameFactor returns 1 + v/c and true where a velocity is to be applied, else 1
// and false, and warns where one is missing.
func (s *Spectrum) frameFactor() (factor float64, corrected bool) {
	if s.Frame != Topocentric && s.Frame != Geocentric && s.Frame != OtherFrame {
		return 1, false
	}
	v, most := s.BaryVelocity, maxObserverSpeed
	if s.Frame == OtherFrame {
		most = maxStandardSpeed
	}
	switch {
	case math.IsNaN(v) && s.Frame == OtherFrame:
		s.Warn(FrameUncertain, "wavelengths in a standard of rest that is not known here or without a direction; kept, up to hundreds of km/s off")
		return 1, false
	case math.IsNaN(v):
		s.Warn(FrameAssumed, "%s wavelengths without the time, place and direction to correct them; kept, up to 31 km/s off", s.Frame)
		return 1, false
	case math.Abs(v) > most:
		s.Warn(FrameUncertain, "barycentric velocity %.1f km/s is not one of an observer near the Earth; %s wavelengths kept", v, s.Frame)
		return 1, false
	}
	return 1 + v/SpeedOfLight, true
}
