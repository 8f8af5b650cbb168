package spectrum

import "math"

// Site is a place on the Earth: east longitude and geodetic latitude in degrees
// and height in meters, on the WGS84 ellipsoid.
type Site struct{ LonDeg, LatDeg, HeightM float64 }

// The dates for which the velocity of the Earth is known here: 1950 January 1 to
// 2100 January 1.
const (
	earthFirstJD = 2433282.5
	earthLastJD  = 2488069.5
)

const (
	arcsec        = math.Pi / (180 * 3600)
	earthRotation = 7.292115e-5       // rad/s, WGS84
	earthRadius   = 6378137.0         // m, WGS84 equatorial radius
	earthFlat     = 1 / 298.257223563 // WGS84 flattening
	sunGM         = 1.32712440018e20  // m^3/s^2
	earthGM       = 3.986004418e14    // m^3/s^2, WGS84
	astroUnit     = 149597870700.0    // m, IAU 2012 resolution B2
)

// BarycentricVelocity returns the velocity in km/s that brings wavelengths seen
// at site to the barycenter of the solar system:
//
//	1 + z_bary = (1 + z_obs)(1 + v/c),
//
// positive when the observer moves towards the source at ICRS position (raDeg,
// decDeg). jdUTC is the Julian date, UTC, of mid-exposure. Following Wright &
// Eastman 2014 (PASP 126, 838),
//
//	1 + v/c = gamma (1 + n.u/c) / (1 - U/c^2)
//
// with u the velocity of the observer, gamma its Lorentz factor and U the
// potential of the Sun and of the Earth at the observer. u is the sum of the
// Earth's barycentric velocity, by a trigonometric series within 0.3 m/s of the
// ERFA routine epv00 in every component (fitted by
// testdata/fit_earth_series.py), and of the rotation of the Earth with
// precession (Capitaine, Wallace & Chapront 2003, A&A 412, 567). Left out, each
// below 0.05 m/s: nutation, polar motion, UT1-UTC, planetary potentials, TDB-TT.
// Left out as well: parallax, proper motion and the light travel time in the
// source's system, which need more than a direction.
//
// Outside 1950-2100 and for arguments that are not finite the result is NaN.
func BarycentricVelocity(site Site, jdUTC, raDeg, decDeg float64) (kms float64) {
	lat, lon := site.LatDeg*math.Pi/180, site.LonDeg*math.Pi/180
	sinLat, cosLat := math.Sincos(lat)
	e2 := earthFlat * (2 - earthFlat)
	normal := earthRadius / math.Sqrt(1-e2*sinLat*sinLat)
	axisDistance := (normal + site.HeightM) * cosLat
	height := (normal*(1-e2) + site.HeightM) * sinLat
	u := rotationVelocity(axisDistance, lon, jdUTC)
	return barycentric(u, earthGM/math.Hypot(axisDistance, height), jdUTC, raDeg, decDeg)
}

// GeocenterVelocity is BarycentricVelocity for an observer at the center of the
// Earth, without the Earth's potential: for wavelengths in the geocentric frame
// and, good to 0.47 km/s, for an observer whose site is not known.
func GeocenterVelocity(jdUTC, raDeg, decDeg float64) (kms float64) {
	return barycentric([3]float64{}, 0, jdUTC, raDeg, decDeg)
}

// barycentric finishes the work for a geocentric velocity u in m/s, ICRS axes,
// and a potential of the Earth in m^2/s^2.
func barycentric(u [3]float64, earthPotential, jdUTC, raDeg, decDeg float64) float64 {
	if !(jdUTC >= earthFirstJD && jdUTC <= earthLastJD) {
		return math.NaN()
	}
	const c = SpeedOfLight * 1000
	t := (terrestrialTime(jdUTC) - 2451545.0) / 36525
	earth := earthVelocity(t)
	sinRA, cosRA := math.Sincos(raDeg * math.Pi / 180)
	sinDec, cosDec := math.Sincos(decDeg * math.Pi / 180)
	n := [3]float64{cosDec * cosRA, cosDec * sinRA, sinDec}
	var along, speed2 float64
	for i := range u {
		v := earth[i] + u[i]
		along += n[i] * v / c
		speed2 += v * v / (c * c)
	}
	// Two-body distance of the Sun: its error changes the potential by 1e-4.
	anomaly := (357.52911 + 35999.05029*t) * math.Pi / 180
	distance := astroUnit * (1.00014 - 0.01671*math.Cos(anomaly))
	potential := (sunGM/distance + earthPotential) / (c * c)
	factor := (1 + along) / math.Sqrt(1-speed2) / (1 - potential)
	if math.IsInf(factor, 0) {
		return math.NaN()
	}
	return (factor - 1) * SpeedOfLight
}

// rotationVelocity returns the velocity in m/s, ICRS axes, of a place at
// axisDistance meters from the Earth's axis and east longitude lon in radians.
// Sidereal time and precession angles are those of IAU 2006 (Capitaine et al.
// 2003), the Earth rotation angle that of Capitaine, Guinot & McCarthy 2000 (A&A
// 355, 398); UT1 is taken as UTC.
func rotationVelocity(axisDistance, lon, jdUTC float64) [3]float64 {
	d := jdUTC - 2451545.0
	t := d / 36525
	turns := math.Mod(0.7790572732640+0.00273781191135448*d, 1) + math.Mod(d, 1)
	sidereal := 2*math.Pi*turns + (0.014506+(4612.156534+1.3915817*t)*t)*arcsec
	sinST, cosST := math.Sincos(sidereal + lon)
	v := axisDistance * earthRotation
	x, y := -v*sinST, v*cosST
	zeta := (2.650545 + (2306.083227+(0.2988499+0.01801828*t)*t)*t) * arcsec
	z := (-2.650545 + (2306.077181+(1.0927348+0.01826837*t)*t)*t) * arcsec
	theta := (2004.191903 - (0.4294934+0.04182264*t)*t) * t * arcsec
	// From the equator of date back to that of J2000: Rz(zeta) Ry(-theta) Rz(z).
	sinZ, cosZ := math.Sincos(z)
	x, y = x*cosZ+y*sinZ, -x*sinZ+y*cosZ
	sinTheta, cosTheta := math.Sincos(theta)
	x, up := x*cosTheta, -x*sinTheta
	sinZeta, cosZeta := math.Sincos(zeta)
	return [3]float64{x*cosZeta + y*sinZeta, -x*sinZeta + y*cosZeta, up}
}

// earthVelocity returns the barycentric velocity of the Earth in m/s, ICRS axes,
// at t Julian centuries (TT) from J2000.
func earthVelocity(t float64) [3]float64 {
	v := earthConstant
	for i := range earthSeries {
		s := &earthSeries[i]
		var phase float64
		for k := range earthArguments {
			phase += s[k] * (earthArguments[k][0] + earthArguments[k][1]*t)
		}
		sin, cos := math.Sincos(phase)
		for range int(s[10]) {
			sin, cos = sin*t, cos*t
		}
		for axis := range v {
			v[axis] += s[11+axis]*cos + s[14+axis]*sin
		}
	}
	return v
}
