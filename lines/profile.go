package lines

import "math"

const (
	invSqrt2Pi = 0.3989422804014327
	// profileReach is how many sigma a profile is followed; beyond lie 6e-7
	// of its area.
	profileReach = 5.0
	// sampledFrom is the sigma, in pixels, from which the mean of a Gaussian
	// over a pixel is computed by series instead of error functions. The first
	// neglected term is the sixth cumulant of the pixel, d^6/252: 2e-4 of the
	// peak at 0.8 pixels, falling with the sixth power.
	sampledFrom = 0.8
	// plainFrom is the sigma, in pixels, from which the fourth cumulant,
	// -d^4/120, is neglected as well: 4e-5 of the peak and less.
	plainFrom = 2.2
)

// gauss is a Gaussian of unit area averaged over pixels of width d.
//
// A Gaussian of variance sigma^2 convolved with a pixel has variance
// e^2 = sigma^2 + d^2/12 and fourth cumulant -d^4/120 (Gram-Charlier series).
// It satisfies dg/dsigma = sigma d2g/dmu2, as every convolved Gaussian does.
type gauss struct {
	mu, sigma, d float64
	inv, norm, k float64
	exact        bool
}

func newGauss(mu, sigma, d float64) gauss {
	e2 := sigma*sigma + d*d/12
	inv := 1 / math.Sqrt(e2)
	g := gauss{mu: mu, sigma: sigma, d: d, inv: inv, norm: invSqrt2Pi * inv, exact: sigma < sampledFrom*d}
	if sigma < plainFrom*d {
		r := d * d / e2
		g.k = -r * r / (24 * 120)
	}
	return g
}

// at returns the mean over the pixel centered on x and its derivatives to
// center and sigma.
func (g *gauss) at(x float64) (v, dmu, dsigma float64) {
	if g.exact {
		return g.byErf(x)
	}
	u := (x - g.mu) * g.inv
	u2 := u * u
	p := g.norm * decay(0.5*u2)
	f := g.sigma * g.inv * g.inv
	if g.k == 0 {
		return p, p * u * g.inv, p * (u2 - 1) * f
	}
	// Hermite polynomials of order 4, 5 and 6.
	h4 := (u2-6)*u2 + 3
	h5 := ((u2-10)*u2 + 15) * u
	h6 := ((u2-15)*u2+45)*u2 - 15
	return p * (1 + g.k*h4), p * (u + g.k*h5) * g.inv, p * (u2 - 1 + g.k*h6) * f
}

const decayEnd = 32

// decayTable holds exp(-k/64).
var decayTable = func() (t [64 * decayEnd]float64) {
	for k := range t {
		t[k] = math.Exp(-float64(k) / 64)
	}
	return t
}()

// decay returns exp(-x) for x >= 0 from a table and the Taylor series to the
// fourth order: relative error 8e-12. From decayEnd on it is 0.
func decay(x float64) float64 {
	if !(x < decayEnd) {
		return 0
	}
	k := int(64 * x)
	r := x - float64(k)*(1./64)
	return decayTable[k] * (1 - r*(1-r*(0.5-r*(1./6-r*(1./24)))))
}

// values adds share times the profile at the pixels x to amp, each times root. The
// profile must not be exact.
func (g *gauss) values(x, root []float64, share float64, amp []float64) {
	mu, inv, norm, k := g.mu, g.inv, share*g.norm, g.k
	amp, root = amp[:len(x)], root[:len(x)]
	for i, l := range x {
		u := (l - mu) * inv
		u2 := u * u
		p := norm * decay(0.5*u2) * root[i]
		if k != 0 {
			p *= 1 + k*((u2-6)*u2+3)
		}
		amp[i] += p
	}
}

// columns adds what at returns at the pixels x, times share, scaleV and scaleS,
// to amp, colV and colS, each times root. The profile must not be exact.
func (g *gauss) columns(x, root []float64, share, scaleV, scaleS float64, amp, colV, colS []float64) {
	mu, inv, norm, k := g.mu, g.inv, g.norm, g.k
	scaleV *= inv
	scaleS *= g.sigma * inv * inv
	amp, colV, colS, root = amp[:len(x)], colV[:len(x)], colS[:len(x)], root[:len(x)]
	for i, l := range x {
		u := (l - mu) * inv
		u2 := u * u
		p := norm * decay(0.5*u2) * root[i]
		if k == 0 {
			amp[i] += share * p
			colV[i] += scaleV * p * u
			colS[i] += scaleS * p * (u2 - 1)
			continue
		}
		amp[i] += share * p * (1 + k*((u2-6)*u2+3))
		colV[i] += scaleV * p * u * (1 + k*((u2-10)*u2+15))
		colS[i] += scaleS * p * (u2 - 1 + k*(((u2-15)*u2+45)*u2-15))
	}
}

func (g *gauss) byErf(x float64) (v, dmu, dsigma float64) {
	a, b := (x-0.5*g.d-g.mu)/g.sigma, (x+0.5*g.d-g.mu)/g.sigma
	fa, fb := invSqrt2Pi*math.Exp(-0.5*a*a), invSqrt2Pi*math.Exp(-0.5*b*b)
	w := 1 / (g.sigma * g.d)
	return cumulative(a, b) / g.d, (fa - fb) * w, (a*fa - b*fb) * w
}

// cumulative returns the area of the unit Gaussian between a and b > a.
func cumulative(a, b float64) float64 {
	return 0.5 * (math.Erf(b*math.Sqrt2/2) - math.Erf(a*math.Sqrt2/2))
}

// pixelEdges returns the edges of pixel i: halfway to its neighbors, but never
// farther than 1.5 times the half step on the other side, so that a pixel
// beside a gap does not stand for the gap. A lone pixel has no width.
func pixelEdges(wave []float64, i int) (lo, hi float64) {
	n := len(wave)
	if n == 1 {
		return wave[i], wave[i]
	}
	var left, right float64
	if i > 0 {
		left = 0.5 * (wave[i] - wave[i-1])
	}
	if i < n-1 {
		right = 0.5 * (wave[i+1] - wave[i])
	}
	switch {
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
