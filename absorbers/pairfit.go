package absorbers

import "math"

const (
	// flankPair is how much of the spectrum beside the lines of a doublet takes
	// part in its fit, km/s, each way.
	flankPair = 700.0
	// The continuum may leave the envelope by a polynomial of one order for
	// every orderKms of the fit.
	orderKms              = 650.0
	leastOrder, mostOrder = 3, 6
	pairTerms             = mostOrder + 3 // with order 0 and two lines
	// A line reaches corePair sigmas of its Gaussian to either side: beyond,
	// pixels count where they hold the envelope.
	corePair = 2.5
	// Sigmas that are tried: from that of the instrument or firstSigma of a
	// pixel by factors of sigmaGrowth to mostSigma, km/s, or mostOfSplit of the
	// distance of the lines.
	firstSigma, sigmaGrowth = 0.75, 1.4
	mostSigma, mostOfSplit  = 220.0, 0.3
	// Places that are tried: so many steps each way, of placeStep of a pixel.
	placeSteps, placeStep = 3, 0.5
	// Fewest pixels for every term of the fit.
	pixelsPerTerm = 1.5
)

// pairFit is the best pair of Gaussian lines of one doublet at one place, beside
// a free polynomial continuum.
type pairFit struct {
	x, sigma         float64 // km/s
	strong, weak     float64 // depths
	strongErr, wkErr float64
	gain             float64 // chi^2 that a pair in a ratio it can have explains
	lone             float64 // what the stronger line alone explains
	misfit           float64 // what a pair in any ratio would explain beyond gain
}

// legendreTerms fills v with the Legendre polynomials of order 0, 1, ... at u.
func legendreTerms(u float64, v []float64) {
	v[0] = 1
	if len(v) > 1 {
		v[1] = u
	}
	for k := 2; k < len(v); k++ {
		v[k] = (float64(2*k-1)*u*v[k-1] - float64(k-1)*v[k-2]) / float64(k)
	}
}

// fitPair fits a doublet at x: over Gaussian widths first, then over places. The
// depths are linear parameters beside the polynomial, so that a curved
// continuum is not taken for lines.
func (s *Scratch) fitPair(d *doublet, x float64) (best pairFit, ok bool) {
	t := &s.track
	i := min(index(t.x, x), len(t.x)-1)
	step := t.dx[i]
	try := func(at, sigma float64) {
		if p, good := s.pairAt(d, at, sigma); good && (!ok || p.gain-p.misfit > best.gain-best.misfit) {
			best, ok = p, true
		}
	}
	first := max(firstSigma*step, t.sres[i])
	for sigma := first; sigma == first || sigma <= min(mostSigma, mostOfSplit*d.split); sigma *= sigmaGrowth {
		try(x, sigma)
	}
	if !ok {
		return best, false
	}
	sigma := best.sigma
	for k := -placeSteps; k <= placeSteps; k++ {
		if k != 0 {
			try(x+float64(k)*placeStep*step, sigma)
		}
	}
	return best, true
}

// pairAt solves for the depths of both lines and the polynomial.
func (s *Scratch) pairAt(d *doublet, x, sigma float64) (p pairFit, ok bool) {
	t, m := &s.track, &s.metal
	p.x, p.sigma = x, sigma
	length := d.split + 2*flankPair
	order := min(max(int(length/orderKms), leastOrder), mostOrder)
	mid := x + 0.5*d.split
	n := order + 3 // polynomial, two lines
	var a [pairTerms][pairTerms + 1]float64
	var row [pairTerms]float64
	used := 0
	lo, hi := index(t.x, x-flankPair), index(t.x, x+d.split+flankPair)
	reach := corePair * sigma
	for i := lo; i < hi; i++ {
		if m.weight[i] == 0 {
			continue
		}
		u, v := t.x[i]-x, t.x[i]-x-d.split
		inA, inB := math.Abs(u) < reach, math.Abs(v) < reach
		if !inA && !inB && (!s.red.keep[i] || m.taken[i]) {
			continue
		}
		if inA {
			if _, _, foreign := s.foreign(i, d.split, d.ratio); foreign {
				continue
			}
		}
		if inB {
			if _, _, foreign := s.foreign(i, -d.split, 1); foreign {
				continue
			}
		}
		legendreTerms(2*(t.x[i]-mid)/length, row[:order+1])
		row[n-2], row[n-1] = 0, 0
		if math.Abs(u) < 4*sigma {
			row[n-2] = math.Exp(-0.5 * u * u / (sigma * sigma))
		}
		if math.Abs(v) < 4*sigma {
			row[n-1] = math.Exp(-0.5 * v * v / (sigma * sigma))
		}
		w := m.weight[i] / m.memory
		for r := range n {
			wr := w * row[r]
			if wr == 0 {
				continue
			}
			for c := range r + 1 {
				a[r][c] += wr * row[c]
			}
			a[r][pairTerms] += wr * m.depth[i]
		}
		used++
	}
	if float64(used) < pixelsPerTerm*float64(n) {
		return p, false
	}
	// Cholesky factor in place, right side last; the lines come last, so that
	// their 2x2 block of the factor gives their covariance.
	for r := range n {
		for c := 0; c <= r; c++ {
			v := a[r][c]
			for k := range c {
				v -= a[r][k] * a[c][k]
			}
			if c < r {
				a[r][c] = v / a[c][c]
				continue
			}
			if !(v > 1e-9*a[r][r]) {
				return p, false
			}
			a[r][r] = math.Sqrt(v)
		}
		v := a[r][pairTerms]
		for k := range r {
			v -= a[r][k] * a[k][pairTerms]
		}
		a[r][pairTerms] = v / a[r][r]
	}
	// Information on the depths with the polynomial free: L22 L22^T.
	l11, l21, l22 := a[n-2][n-2], a[n-1][n-2], a[n-1][n-1]
	y1, y2 := a[n-2][pairTerms], a[n-1][pairTerms]
	p.weak = y2 / l22
	p.strong = (y1 - l21*p.weak) / l11
	p.wkErr = math.Hypot(1/l22, contFloor)
	p.strongErr = math.Hypot(math.Hypot(1/l11, l21/(l11*l22)), contFloor)
	// chi^2 explained by depths (A, B): 2 b.d - d^T I d.
	explained := func(A, B float64) float64 {
		z1, z2 := l11*A+l21*B, l22*B
		return 2*(z1*y1+z2*y2) - z1*z1 - z2*z2
	}
	// The floor of the continuum counts like noise.
	dim := 1 / (l11 * l11 * p.strongErr * p.strongErr)
	full := (y1*y1 + y2*y2) * dim
	along := func(k float64) float64 {
		// Depths A and k A.
		z1, z2 := l11+l21*k, l22*k
		A := max(0, (z1*y1+z2*y2)/(z1*z1+z2*z2))
		return explained(A, k*A) * dim
	}
	// Alone: where the other line has no depth.
	alone := 0.0
	if A := y1 / l11; A > 0 {
		alone = explained(A, 0) * dim
	}
	switch ratio := p.weak / p.strong; {
	case p.strong > 0 && ratio > 1/d.ratio && ratio < 1:
		p.gain = full
	default:
		p.gain = max(along(1), along(1/d.ratio))
	}
	p.lone, p.misfit = alone, full-p.gain
	return p, true
}
