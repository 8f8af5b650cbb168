package lines

import (
	"math"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// Profile is the form of a line that is fitted.
type Profile int

// The profiles.
const (
	// Gaussian is the default.
	Gaussian Profile = iota
	// Hermite is a Gaussian times 1 + h3 H3(u) + h4 H4(u), u = (lambda -
	// center)/sigma, with the polynomials of van der Marel & Franx (1993, ApJ
	// 407, 525): H3 = (2 sqrt2 u^3 - 3 sqrt2 u)/sqrt6, H4 = (4 u^4 - 12 u^2 +
	// 3)/sqrt24. The flux is that of the whole profile.
	Hermite
	// Voigt is a Gaussian convolved with a Lorentzian, whose half width at
	// half maximum is the shape parameter, km/s.
	Voigt
	// stark is the form of hydrogen in hot stars, see starkCore.
	stark
)

const (
	// shapeFrom is the S/N of the best box from which an ion gets shape
	// parameters when a profile is asked for; fainter ones stay Gaussian.
	shapeFrom = 12.0
	// hermiteMost bounds |h3| and |h4|; beyond, profiles go far below zero.
	hermiteMost = 0.3
	// hermiteArea is the area of a Gaussian times H4.
	hermiteArea = 0.6123724356957945 // sqrt6/4
	// starkCore is s over sigma of the profile (1 + (x/s)^2)^(-5/4). Its wings fall
	// as those of linear Stark broadening by ions, with the power -5/2 (Holtsmark
	// 1919); the core is chosen smooth, no source. sigma is defined by the full
	// width at half maximum, 2.3548 sigma, that is s = 1.17741 sigma /
	// sqrt(2^(4/5) - 1).
	starkCore = 1.3676942
	// starkArea is the area in units of s, sqrt(pi) Gamma(3/4)/Gamma(5/4).
	starkArea = 2.3962805
	// starkReach is how many sigma it is followed.
	starkReach = 40.0
	// starkWidest is the largest sigma, km/s: white dwarfs.
	starkWidest = 4000.0
	// starkDoubt is the relative standard error for what the core has of another
	// form, from Vega: direct sums between given windows differ by that from
	// what the profile has in them.
	starkDoubt = 0.03
	// starkMetal is that of the other lines of the same star: the fastest
	// rotation. Both common practice, no source.
	starkMetal = 300.0
	// voigtReach is how many Lorentzian half widths a profile is followed
	// beyond the Gaussian's reach.
	voigtReach = 25.0
)

// shape adds the parameters of a Profile to a Gaussian averaged over a pixel.
type shape struct {
	gauss
	profile Profile
	a, b    float64 // h3 and h4, or the Lorentzian half width in Angstrom
}

// shapeOf returns the profile of a component on an arm for pixels of width d.
func (q *problem) shapeOf(t *tie, p []float64, lam0, mu, sigma, d float64) shape {
	g := shape{gauss: newGauss(mu, sigma, d)}
	if t.stark {
		g.profile = stark
	}
	if t.pa >= 0 {
		g.profile, g.a = q.profileAs, p[t.pa]
		if t.pb >= 0 {
			g.b = p[t.pb]
		} else {
			g.a *= lam0 / spectrum.SpeedOfLight
		}
	}
	return g
}

// full returns the profile of unit area at x and its derivatives to center,
// sigma and the shape parameters, the Lorentzian width in Angstrom.
func (g *shape) full(x float64) (v, dmu, dsigma, da, db float64) {
	switch g.profile {
	case Hermite:
		v, dmu, dsigma = g.at(x)
		u := (x - g.mu) * g.inv
		h3 := math.Sqrt2 / math.Sqrt(6) * (2*u*u - 3) * u
		h4 := (4*u*u*u*u - 12*u*u + 3) / math.Sqrt(24)
		s3 := math.Sqrt2 / math.Sqrt(6) * (6*u*u - 3)
		s4 := (16*u*u*u - 24*u) / math.Sqrt(24)
		area := 1 + hermiteArea*g.b
		poly := (1 + g.a*h3 + g.b*h4) / area
		slope := (g.a*s3 + g.b*s4) / area
		da, db = v*h3/area, v*(h4-hermiteArea*poly)/area
		dmu = dmu*poly - v*slope*g.inv
		// The scale of u is the sigma widened by the pixel.
		dsigma = dsigma*poly - v*slope*u*g.sigma*g.inv*g.inv
		return v * poly, dmu, dsigma, da, db
	case Voigt:
		// With the complex error function w(z), z = (x - mu + i gamma)/(sqrt2
		// s), V = Re w/(sqrt(2 pi) s), and w' = -2 z w + 2i/sqrt(pi).
		s := 1 / g.inv
		k := 1 / (math.Sqrt2 * s)
		zr, zi := (x-g.mu)*k, math.Abs(g.a)*k
		w := hydrogen.Faddeeva(complex(zr, zi))
		re, im := real(w), imag(w)
		dre := -2 * (zr*re - zi*im)
		dim := -2*(zr*im+zi*re) + 2/math.Sqrt(math.Pi)
		n := invSqrt2Pi / s
		v = n * re
		dmu = -n * dre * k
		da = -n * dim * k // d Re w / d zi = -Im w'
		ds := -v/s - n*(dre*zr-dim*zi)/s
		return v, dmu, ds * g.sigma * g.inv, da, 0
	}
	if g.profile == stark {
		u := (x - g.mu) * g.inv / starkCore
		r := 1 / (1 + u*u)
		root := math.Sqrt(r)
		v = g.inv / (starkCore * starkArea) * r * math.Sqrt(root)
		slope := 2.5 * u * r * v
		return v, slope * g.inv / starkCore, (slope*u - v) * g.sigma * g.inv * g.inv, 0, 0
	}
	v, dmu, dsigma = g.at(x)
	return v, dmu, dsigma, 0, 0
}

// far returns how far from its center a profile is followed.
func (t *tie) far(p []float64, lam0, sigma float64) float64 {
	r := profileReach * sigma
	if t.stark {
		return starkReach * sigma
	}
	if t.pa >= 0 && t.pb < 0 {
		r += voigtReach * math.Abs(p[t.pa]) * lam0 / spectrum.SpeedOfLight
	}
	return r
}
