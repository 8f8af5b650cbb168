package fitsread

import (
	"fmt"
	"math"

	"duskline/spectrum"
)

// observerVelocity is what VELOSYS says: the radial velocity of the observer in a
// standard of rest, FITS Paper III (Greisen et al. 2006), section 7.
type observerVelocity struct {
	key      string  // "" where there is none
	kms      float64 // brings topocentric wavelengths to that standard: 1 + z_standard = (1 + z_topo)(1 + kms/c)
	frame    spectrum.Frame
	standard string // SPECSYS of a standard beyond the solar system
}

// readVelosys reads VELOSYS (m/s) of all descriptions of the axis. It is positive
// where the source recedes faster from the observer than from the standard of
// rest that the description's SPECSYS names, nu_topo = nu_standard
// sqrt((c-v)/(c+v)), and so belongs to alternate descriptions of topocentric data
// too. One of the solar system's center goes before others; next to a topocentric
// SPECSYS, where it should be zero, it counts last.
func readVelosys(hs []*hdu) (best observerVelocity) {
	rank := map[spectrum.Frame]int{spectrum.Barycentric: 4, spectrum.Heliocentric: 3, spectrum.OtherFrame: 2, spectrum.Topocentric: 1}
	for letter := byte('A' - 1); letter <= 'Z'; letter++ {
		alt := string(letter)
		if letter < 'A' {
			alt = ""
		}
		v, _, ok := findNumber(hs, "VELOSYS"+alt)
		if !ok || math.Abs(v) >= lightSpeed {
			continue
		}
		c, _ := findCard(hs, "SPECSYS"+alt)
		frame, standard, ok := frameNamed(c.value())
		if !ok || rank[frame] <= rank[best.frame] && best.key != "" || rank[frame] == 0 || frame == spectrum.Topocentric && v == 0 {
			continue
		}
		best = observerVelocity{key: "VELOSYS" + alt, frame: frame, standard: standard,
			kms: (math.Sqrt((lightSpeed-v)/(lightSpeed+v)) - 1) * spectrum.SpeedOfLight}
	}
	return best
}

// toBarycenter returns the velocity that brings topocentric wavelengths to the
// barycenter, NaN where it is not told.
func (o *observerVelocity) toBarycenter(ra, dec float64) float64 {
	switch {
	case o.key == "":
		return math.NaN()
	case o.frame != spectrum.OtherFrame:
		return o.kms
	}
	rest := spectrum.RestStandardVelocity(o.standard, ra, dec)
	return o.kms + rest + o.kms*rest/spectrum.SpeedOfLight // the product of the two factors
}

// observerTolerance in km/s is how far VELOSYS may be from time, place and
// direction: it is for the center of a field, 1.6 km/s from its edge at 3 degrees,
// and where no place is known the rotation of the Earth, 0.47 km/s, is left out.
const observerTolerance = 2.1

// computedVelocity returns the velocity of the observer from time, place and
// direction, NaN where they are missing. Without a site the center of the Earth
// stands for it, good to 0.47 km/s.
func (o *observation) computedVelocity(ra, dec float64) float64 {
	switch {
	case math.IsNaN(o.jd) || math.IsNaN(ra) || math.IsNaN(dec):
		return math.NaN()
	case o.siteKnown && o.frame != spectrum.Geocentric:
		return spectrum.BarycentricVelocity(o.site, o.jd, ra, dec)
	}
	return spectrum.GeocenterVelocity(o.jd, ra, dec)
}

// baryVelocity returns the velocity that brings the spectrum to the barycenter:
// from time, place and direction; else as a card states it. NaN where nothing
// tells. doubt says what speaks against it, "" for nothing.
func (o *observation) baryVelocity(ra, dec float64) (kms float64, doubt string) {
	computed, stated := o.computedVelocity(ra, dec), o.observer.toBarycenter(ra, dec)
	if d := computed - stated; math.Abs(d) > observerTolerance && o.frame != spectrum.Geocentric {
		doubt = fmt.Sprintf("card %s makes the observer's velocity %.1f km/s, time and direction make it %.1f", o.observer.key, stated, computed)
	}
	switch {
	case o.frame == spectrum.OtherFrame:
		return spectrum.RestStandardVelocity(o.standard, ra, dec), doubt
	case o.frame != spectrum.Topocentric && o.frame != spectrum.Geocentric:
		return math.NaN(), doubt
	case !math.IsNaN(computed):
		return computed, doubt
	case !math.IsNaN(o.velocity) || o.frame == spectrum.Geocentric:
		return o.velocity, doubt
	case o.observer.frame == spectrum.Topocentric && o.observer.key != "":
		return stated, fmt.Sprintf("card %s gives the observer's velocity without a standard of rest; taken for that to the barycenter", o.observer.key)
	}
	return stated, doubt
}
