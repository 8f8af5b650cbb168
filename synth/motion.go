package synth

import (
	"math/rand/v2"

	"duskline/spectrum"
)

// Lines do not stand at the redshift of their object, and no two objects are alike in
// this: what the errors of redshifts of real surveys are made of. The numbers are one
// standard deviation in km/s.
const (
	// Hot stars have few and broad lines, blended with those of companions that are not
	// told apart, and pulsate; common practice, no source.
	hotStarMotion = 35
	// The same for stars with the lines of metals; common practice, no source.
	solarStarMotion = 20
	// Interstellar lines and Lyman-alpha of star-forming galaxies against their nebular
	// lines (Steidel et al. 2010, ApJ 717, 289, from memory).
	outflowMotion    = 160
	lymanAlphaMotion = 180
	// Lines of quasars against their host (Shen et al. 2016, ApJ 831, 7, from memory): C IV and
	// its like about their trend with luminosity, which adds as much (Richards et al. 2011,
	// AJ 141, 167, from memory); C III] with its changing blend; Mg II; broad Balmer lines; narrow lines.
	windMotion      = 590
	carbonMotion    = 300
	magnesiumMotion = 205
	balmerMotion    = 400
	narrowMotion    = 56
	// Lyman-alpha of quasars takes half of the wind's part; common practice, no source.
	lymanAlphaShare = 0.5
	// The zero point of the wavelengths of one fiber: a tenth of a pixel of 69 km/s; common practice, no source.
	calibrationMotion = 7
)

// starMotion is the scatter of the velocity that the lines of a star show.
func starMotion(kelvin float64) float64 {
	switch {
	case kelvin > 6050:
		return hotStarMotion
	case kelvin > 5250:
		return solarStarMotion
	}
	return 0 // many sharp lines
}

// moved returns the redshift of lines that move with a velocity, km/s, in an object at z.
func moved(z, velocity float64) float64 { return z + (1+z)*velocity/spectrum.SpeedOfLight }

// quasarMotion is how the lines of one quasar move.
type quasarMotion struct{ wind, carbon, magnesium, balmer, narrow float64 }

func newQuasarMotion(r *rand.Rand) quasarMotion {
	return quasarMotion{windMotion * r.NormFloat64(), carbonMotion * r.NormFloat64(), magnesiumMotion * r.NormFloat64(),
		balmerMotion * r.NormFloat64(), narrowMotion * r.NormFloat64()}
}

// of returns the velocity, beyond the typical one, of a broad line by its rest wavelength.
func (m quasarMotion) of(wave float64) float64 {
	switch {
	case wave > 1200 && wave < 1220:
		return lymanAlphaShare * m.wind
	case wave < 1700:
		return m.wind
	case wave < 2000:
		return m.carbon
	case wave < 3500:
		return m.magnesium
	}
	return m.balmer
}
