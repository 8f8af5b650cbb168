package lines

import "math"

const (
	invSqrt2Pi = 0.3989422804014327
	// profileReach is how many sigma a profile is followed; beyond, it is
	// below 2e-8 of its center.
	profileReach = 6.0
	// sampledFrom is the sigma, in pixels, from which the mean of a Gaussian
	// over a pixel is computed as a Gaussian of variance sigma^2 + d^2/12 at
	// the pixel's center. The first neglected term is the fourth cumulant of
	// the pixel, -d^4/120: 2e-4 of the peak at 1.5 pixels, falling with the
	// fourth power.
	sampledFrom = 1.5
)

// gaussian returns the mean over a pixel, from x-d/2 to x+d/2, of a Gaussian
// of unit area with center mu and standard deviation sigma, and its
// derivatives to mu and sigma. All in one unit; d and sigma positive.
func gaussian(x, d, mu, sigma float64) (g, dmu, dsigma float64) {
	if sigma >= sampledFrom*d {
		e := math.Sqrt(sigma*sigma + d*d/12)
		u := (x - mu) / e
		g = invSqrt2Pi / e * math.Exp(-0.5*u*u)
		return g, g * u / e, g * (u*u - 1) / e * sigma / e
	}
	a, b := (x-0.5*d-mu)/sigma, (x+0.5*d-mu)/sigma
	fa, fb := invSqrt2Pi*math.Exp(-0.5*a*a), invSqrt2Pi*math.Exp(-0.5*b*b)
	g = cumulative(a, b) / d
	return g, (fa - fb) / (sigma * d), (a*fa - b*fb) / (sigma * d)
}

// cumulative returns the area of the unit Gaussian between a and b > a.
func cumulative(a, b float64) float64 {
	return 0.5 * (math.Erf(b*math.Sqrt2/2) - math.Erf(a*math.Sqrt2/2))
}

// pixelEdges returns the edges of pixel i: halfway to its neighbors, but never
// farther than 1.5 times the half step on the other side, so that a pixel
// beside a gap does not stand for the gap. A lone pixel has no width.
func pixelEdges(wave []float64, i int) (lo, hi float64) {
	var left, right float64
	n := len(wave)
	if i > 0 {
		left = 0.5 * (wave[i] - wave[i-1])
	}
	if i < n-1 {
		right = 0.5 * (wave[i+1] - wave[i])
	}
	switch {
	case n == 1:
		return wave[i], wave[i]
	case i == 0:
		left = right
	case i == n-1:
		right = left
	case left > 1.5*right:
		left = 1.5 * right
	case right > 1.5*left:
		right = 1.5 * left
	}
	return wave[i] - left, wave[i] + right
}
