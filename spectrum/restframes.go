package spectrum

import "math"

// standardsOfRest are the motions of the Sun in the standards of rest beyond the
// solar system, FITS Paper III (Greisen et al. 2006, A&A 446, 747), table 12 and
// section 5: speed in km/s towards a galactic longitude and latitude in degrees.
// That of LSRK, 20 km/s towards 18h +30d of 1900, is here in galactic coordinates.
var standardsOfRest = map[string]struct{ speed, l, b float64 }{
	"LSRK":     {20, 56.157457, 22.764802},
	"LSRD":     {16.552945, 53.130102, 25.016893}, // U, V, W = 9, 12, 7 km/s
	"GALACTOC": {220, 90, 0},
	"LOCALGRP": {300, 90, 0},
	"CMBDIPOL": {368, 263.85, 48.25},
}

// RestStandardVelocity returns the velocity in km/s that brings wavelengths in a
// standard of rest of FITS Paper III, table 12 (LSRK, LSRD, GALACTOC, LOCALGRP,
// CMBDIPOL) to the barycenter:
//
//	1 + z_bary = (1 + z)(1 + v/c),
//
// for a direction in degrees, ICRS. It is minus the Sun's motion along the line
// of sight. NaN for other names and directions that are not finite.
func RestStandardVelocity(standard string, raDeg, decDeg float64) (kms float64) {
	m, ok := standardsOfRest[standard]
	if !ok {
		return math.NaN()
	}
	l, b := galactic(raDeg, decDeg)
	sinB, cosB := math.Sincos(b)
	sinA, cosA := math.Sincos(m.b * math.Pi / 180)
	return -m.speed * (sinB*sinA + cosB*cosA*math.Cos(l-m.l*math.Pi/180))
}

// galactic returns galactic longitude and latitude in radians. The pole and the
// longitude of the celestial pole are those of the Hipparcos catalogue (ESA
// SP-1200, 1997, section 1.5.3).
func galactic(raDeg, decDeg float64) (l, b float64) {
	const poleRA, poleDec, node = 192.85948 * math.Pi / 180, 27.12825 * math.Pi / 180, 122.93192 * math.Pi / 180
	sinD, cosD := math.Sincos(decDeg * math.Pi / 180)
	sinP, cosP := math.Sincos(poleDec)
	sinA, cosA := math.Sincos(raDeg*math.Pi/180 - poleRA)
	b = math.Asin(max(-1, min(1, sinD*sinP+cosD*cosP*cosA)))
	l = node - math.Atan2(cosD*sinA, sinD*cosP-cosD*sinP*cosA)
	return l, b
}
