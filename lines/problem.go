package lines

import (
	"math"

	"duskline/spectrum"

	"gonum.org/v1/gonum/floats"
)

// problem is the least-squares problem of one blend. Pixels of all windows lie
// one after the other; masked ones are kept with weight 0.
//
// Parameters: one amplitude (flux) for each line or tied set of lines, then
// offset and width for each ion that has its own, then the two values of the
// straight line of each window.
type problem struct {
	lam, width []float64 // center and width of the pixels, Angstrom
	y, w, cont []float64 // flux minus continuum, weight, continuum
	count      []int     // pixels of the arm in one of these
	windows    []window
	comps      []component
	dsig       []float64 // instrument's variance against the tie's, per component and arm, (km/s)^2
	narms      int
	profileAs  Profile
	ties       []tie
	equal      []equality
	n          int
	fixed      []bool // parameters whose derivatives nobody will ask for
	act        []int  // lists of active parameters of the windows
	cols       []float64
	spans      []span
	res        []float64
	root       []float64 // roots of the weights
	yroot      []float64 // y times them
	slope      []float64 // place on the straight line of the window, times them
}

// window is a run of pixels of one arm with a straight line of its own:
// p[base] + p[base+1] (lam - mid) / half.
type window struct {
	arm, pix0  int // arm and its first pixel
	lo, hi     int // pixels in the problem's slices
	mid, half  float64
	base       int
	prior      float64    // standard error of both values, 0: they are fixed
	act0, act1 int        // active parameters: problem.act[act0:act1]
	pixLimit   int        // one past the arm's last pixel in the window
	line       [3]float64 // sums of the weights times the products of 1 and x
	nAmp       int        // amplitudes among the active ones
}

// component is one line of a blend.
type component struct {
	track   int
	tie     int
	amp     int     // parameter
	part    int     // 1: the broader of two components of the line
	share   float64 // flux = share * p[amp]
	assumed bool    // the share is a guess, not physics
	lot     int     // lines of one lot, not 0, are reported as one sum
	snr     float64 // of the amplitude before stellar absorption was allowed for
	lam0    float64
}

// tie is the offset and the width of one ion in a blend.
type tie struct {
	ion      string
	broad    bool
	sres     float64 // instrument's sigma to which the width refers, km/s
	snr      float64 // of the best box among its lines, signed
	lead     int     // track of that line
	v, s     float64 // offset and total sigma, km/s
	own      bool    // has parameters of its own
	settled  bool    // was freed or bound after a fit, not to be changed again
	stark    bool    // wings of Stark broadening
	borrowed bool    // offset and width come from outside the blend and are held
	pv, ps   int     // parameters: its own, or the main tie's
	pa, pb   int     // parameters of the shape, likewise; -1: none
	a, b     float64 // their values
	vmax     float64
	vprior   float64 // standard error of the offset known beforehand, 0: none
	like     kinship // prior from a stronger line
	smin     float64
	smax     float64
}

// kinship is what a stronger line of the spectrum says of offset and total width,
// the latter in its logarithm; none when dv is 0.
type kinship struct{ v, dv, s, dlns float64 }

// normal implements model. Columns of the Jacobian are kept with the span of
// pixels in which they differ from zero, so that a product of two is one dot
// product over what they share.
func (q *problem) normal(p, a, b []float64) float64 {
	n := q.n
	clear(a)
	clear(b)
	chi2 := 0.0
	for wi := range q.windows {
		win := &q.windows[wi]
		act := q.act[win.act0:win.act1]
		np := win.hi - win.lo
		if np == 0 {
			continue
		}
		if win.prior > 0 {
			iv := 1 / (win.prior * win.prior)
			for k := win.base; k < win.base+2; k++ {
				a[k*n+k] += iv
				b[k] -= iv * p[k]
				chi2 += iv * p[k] * p[k]
			}
		}
		q.jacobian(win, p, act)
		q.res = append(q.res[:0], q.yroot[win.lo:win.hi]...)
		for k := range 2 + win.nAmp {
			s := q.spans[k]
			floats.AddScaled(q.res[s.lo:s.hi], -p[act[k]], q.cols[k*np+s.lo:k*np+s.hi])
		}
		chi2 += floats.Dot(q.res, q.res)
		for k, i := range act {
			s := q.spans[k]
			if s.lo >= s.hi || q.fixed[i] {
				continue
			}
			col := q.cols[k*np : k*np+np]
			b[i] += floats.Dot(q.res[s.lo:s.hi], col[s.lo:s.hi])
			first := k
			if k < 2 {
				for l := k; l < 2; l++ {
					a[act[k]*n+act[l]] += win.line[k+l]
				}
				first = 2
			}
			for l := first; l < len(act); l++ {
				lo, hi := max(s.lo, q.spans[l].lo), min(s.hi, q.spans[l].hi)
				if j := act[l]; lo < hi && !q.fixed[j] {
					a[min(i, j)*n+max(i, j)] += floats.Dot(col[lo:hi], q.cols[l*np+lo:l*np+hi])
				}
			}
		}
	}
	for k := range q.ties {
		e := &q.ties[k]
		if e.own && e.vprior > 0 {
			iv := 1 / (e.vprior * e.vprior)
			a[e.pv*n+e.pv] += iv
			b[e.pv] -= iv * p[e.pv]
			chi2 += iv * p[e.pv] * p[e.pv]
		}
		if e.own && e.like.dv > 0 {
			d, iv := p[e.pv]-e.like.v, 1/(e.like.dv*e.like.dv)
			a[e.pv*n+e.pv] += iv
			b[e.pv] -= iv * d
			chi2 += iv * d * d
			r, slope := math.Log(p[e.ps]/e.like.s)/e.like.dlns, 1/(p[e.ps]*e.like.dlns)
			a[e.ps*n+e.ps] += slope * slope
			b[e.ps] -= slope * r
			chi2 += r * r
		}
	}
	for _, e := range q.equal {
		d := e.a*p[e.i] - e.b*p[e.j]
		a[e.i*n+e.i] += e.weight * e.a * e.a
		a[e.j*n+e.j] += e.weight * e.b * e.b
		a[min(e.i, e.j)*n+max(e.i, e.j)] -= e.weight * e.a * e.b
		b[e.i] -= e.weight * e.a * d
		b[e.j] += e.weight * e.b * d
		chi2 += e.weight * d * d
	}
	return chi2
}

// equality holds two amplitudes of a lot in the ratio of b to a.
type equality struct {
	first, second int // components
	i, j          int // parameters: a p[i] = b p[j]
	a, b, weight  float64
}

// jacobian fills cols and spans with the derivatives of the model at the
// pixels of a window to its active parameters, times the roots of the weights, a
// column each. First come those
// in which the model is linear and homogeneous, the straight line and the
// amplitudes: the model is the sum of them times their columns.
func (q *problem) jacobian(win *window, p []float64, act []int) {
	np := win.hi - win.lo
	q.cols = resize(q.cols, np*len(act))
	q.spans = append(q.spans[:0], span{0, np}, span{0, np})
	for range act[2:] {
		q.spans = append(q.spans, span{np, 0})
	}
	copy(q.cols, q.root[win.lo:win.hi])
	copy(q.cols[np:], q.slope[win.lo:win.hi])
	for ci := range q.comps {
		q.profile(ci, win, p, act)
	}
}

// span is a range of pixels of a window.
type span struct{ lo, hi int }

func (s *span) cover(lo, hi int) { s.lo, s.hi = min(s.lo, lo), max(s.hi, hi) }

// place returns center and total sigma of a component on an arm, Angstrom, and
// the derivative of the latter to the width parameter.
func (q *problem) place(ci, arm int, p []float64) (mu, sigma, dsigma float64) {
	c := &q.comps[ci]
	t := &q.ties[c.tie]
	v, s := t.v, t.s
	if t.pv >= 0 {
		v, s = p[t.pv], p[t.ps]
	}
	total := math.Sqrt(max(s*s+q.dsig[ci*q.narms+arm], 0.01*s*s))
	scale := c.lam0 / spectrum.SpeedOfLight
	return c.lam0 + scale*v, scale * total, scale * s / total
}

// profile adds one component to the Jacobian of a window.
func (q *problem) profile(ci int, win *window, p []float64, act []int) {
	mu, sigma, dsigma := q.place(ci, win.arm, p)
	c := &q.comps[ci]
	t := &q.ties[c.tie]
	lo, hi := q.reach(win, mu, t.far(p, c.lam0, sigma)/profileReach)
	ka := find(act, c.amp)
	if lo >= hi || ka < 0 {
		return
	}
	np := win.hi - win.lo
	amp := q.cols[ka*np : ka*np+np]
	q.spans[ka].cover(lo-win.lo, hi-win.lo)
	kv, ks := -1, -1
	if t.pv >= 0 && !(q.fixed[t.pv] && q.fixed[t.ps]) {
		kv, ks = find(act, t.pv), find(act, t.ps)
	}
	var colV, colS []float64
	if kv >= 0 {
		colV, colS = q.cols[kv*np:kv*np+np], q.cols[ks*np:ks*np+np]
		q.spans[kv].cover(lo-win.lo, hi-win.lo)
		q.spans[ks].cover(lo-win.lo, hi-win.lo)
	}
	var colA, colB []float64
	if k := find(act, t.pa); k >= 0 {
		colA = q.cols[k*np : k*np+np]
		q.spans[k].cover(lo-win.lo, hi-win.lo)
	}
	if k := find(act, t.pb); k >= 0 {
		colB = q.cols[k*np : k*np+np]
		q.spans[k].cover(lo-win.lo, hi-win.lo)
	}
	flux := c.share * p[c.amp]
	scaleV := flux * c.lam0 / spectrum.SpeedOfLight
	scaleS := flux * dsigma
	scaleA := flux
	if t.pb < 0 {
		scaleA = scaleV
	}
	plain := !t.stark && t.pa < 0
	for lo < hi {
		// As long as the pixels are of one width.
		d, to := q.width[lo], q.sameWidth(lo, hi, sigma)
		lam := q.lam[lo:to]
		from, end := lo-win.lo, to-win.lo
		switch g := newGauss(mu, sigma, d); {
		case plain && !g.exact && kv < 0:
			g.values(lam, q.root[lo:to], c.share, amp[from:end])
		case plain && !g.exact:
			g.columns(lam, q.root[lo:to], c.share, scaleV, scaleS, amp[from:end], colV[from:end], colS[from:end])
		default:
			g := q.shapeOf(t, p, c.lam0, mu, sigma, d)
			for i, x := range lam {
				v, dmu, ds, da, db := g.full(x)
				j, r := from+i, q.root[lo+i]
				amp[j] += c.share * v * r
				if kv >= 0 {
					colV[j] += dmu * scaleV * r
					colS[j] += ds * scaleS * r
				}
				if colA != nil {
					colA[j] += da * scaleA * r
				}
				if colB != nil {
					colB[j] += db * flux * r
				}
			}
		}
		lo = to
	}
}

// sameWidth returns the end, hi at most, of the run of pixels from lo on that are of one
// width for a line of the given sigma.
func (q *problem) sameWidth(lo, hi int, sigma float64) int {
	d := q.width[lo]
	most := 0.02 * d
	if sigma > 6*d {
		most = 0.1 * d // d^2/12 hardly counts in the variance
	}
	for i, w := range q.width[lo:hi] {
		if math.Abs(w-d) > most {
			return lo + i
		}
	}
	return hi
}

// reach returns the pixels of a window that a profile touches.
func (q *problem) reach(win *window, mu, sigma float64) (lo, hi int) {
	reach := profileReach * sigma
	lo = win.lo + lowerBound(q.lam[win.lo:win.hi], mu-reach)
	hi = win.lo + lowerBound(q.lam[win.lo:win.hi], mu+reach)
	return max(lo-1, win.lo), min(hi+1, win.hi)
}

// lowerBound returns the first index of an increasing list at or above v. It interpolates
// and bisects in turn: pixels are nearly of one width.
func lowerBound(x []float64, v float64) int {
	lo, hi := 0, len(x)
	for even := false; lo < hi; even = !even {
		mid := (lo + hi) / 2
		if a, b := x[lo], x[hi-1]; !even && hi-lo > 4 {
			if v <= a {
				return lo
			}
			if v > b {
				return hi
			}
			mid = lo + int((v-a)/(b-a)*float64(hi-1-lo))
		}
		if x[mid] < v {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo
}

func find(list []int, v int) int {
	if v < 0 {
		return -1
	}
	for k, x := range list {
		if x == v {
			return k
		}
	}
	return -1
}
