package lines

import (
	"math"

	"duskline/spectrum"
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
	windows    []window
	comps      []component
	dsig       []float64 // instrument's variance against the tie's, per component and arm, (km/s)^2
	narms      int
	ties       []tie
	n          int
	act        []int // lists of active parameters of the windows
	row        []float64
}

// window is a run of pixels of one arm with a straight line of its own:
// p[base] + p[base+1] (lam - mid) / half.
type window struct {
	arm, pix0  int // arm and its first pixel
	lo, hi     int // pixels in the problem's slices
	mid, half  float64
	base       int
	prior      float64 // standard error of both values, 0: they are fixed
	act0, act1 int     // active parameters: problem.act[act0:act1]
	pixLimit   int     // one past the arm's last pixel in the window
	nAmp       int     // amplitudes among the active ones
}

// component is one line of a blend.
type component struct {
	track   int
	tie     int
	amp     int     // parameter
	share   float64 // flux = share * p[amp]
	assumed bool    // the share is a guess, not physics
	lam0    float64
}

// tie is the offset and the width of one ion in a blend.
type tie struct {
	ion     string
	broad   bool
	sres    float64 // instrument's sigma to which the width refers, km/s
	snr     float64 // of the best box among its lines, signed
	lead    int     // track of that line
	v, s    float64 // offset and total sigma, km/s
	own     bool    // has parameters of its own
	settled bool    // not to be freed again
	pv, ps  int     // parameters: its own, or the main tie's
	vmax    float64
	smin    float64
	smax    float64
}

// normal implements model.
func (q *problem) normal(p, a, b []float64) float64 {
	n := q.n
	clear(a)
	clear(b)
	chi2 := 0.0
	for wi := range q.windows {
		win := &q.windows[wi]
		act := q.act[win.act0:win.act1]
		m := len(act)
		size := (win.hi - win.lo) * m
		if cap(q.row) < size {
			q.row = make([]float64, 2*size)
		}
		jac := q.row[:size]
		clear(jac)
		for i := win.lo; i < win.hi; i++ {
			r := jac[(i-win.lo)*m:]
			r[0], r[1] = 1, (q.lam[i]-win.mid)/win.half
		}
		for ci := range q.comps {
			q.profile(ci, win, p, jac, act)
		}
		for i := win.lo; i < win.hi; i++ {
			wt := q.w[i]
			if wt == 0 {
				continue
			}
			r := jac[(i-win.lo)*m : (i-win.lo)*m+m]
			// The model is linear in the line and the amplitudes; the
			// offsets' and widths' entries are derivatives only.
			res := q.y[i] - p[win.base]*r[0] - p[win.base+1]*r[1]
			for k := 2; k < 2+win.nAmp; k++ {
				res -= p[act[k]] * r[k]
			}
			chi2 += wt * res * res
			for k, rk := range r {
				if rk == 0 {
					continue
				}
				f := wt * rk
				b[act[k]] += f * res
				ak := a[act[k]*n:]
				for l := k; l < m; l++ {
					ak[act[l]] += f * r[l]
				}
			}
		}
		if win.prior > 0 {
			iv := 1 / (win.prior * win.prior)
			for k := range 2 {
				c := p[win.base+k]
				a[(win.base+k)*n+win.base+k] += iv
				b[win.base+k] -= iv * c
				chi2 += iv * c * c
			}
		}
	}
	// Active lists start with the straight line, so entries may have landed
	// below the diagonal.
	for i := range n {
		for j := i + 1; j < n; j++ {
			a[i*n+j] += a[j*n+i]
		}
	}
	return chi2
}

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
func (q *problem) profile(ci int, win *window, p, jac []float64, act []int) {
	mu, sigma, dsigma := q.place(ci, win.arm, p)
	lo, hi := q.span(win, mu, sigma)
	if lo >= hi {
		return
	}
	c := &q.comps[ci]
	t := &q.ties[c.tie]
	m := len(act)
	ka, kv, ks := find(act, c.amp), find(act, t.pv), find(act, t.ps)
	if ka < 0 {
		return
	}
	scale := c.lam0 / spectrum.SpeedOfLight
	flux := c.share * p[c.amp]
	for i := lo; i < hi; i++ {
		g, dmu, ds := gaussian(q.lam[i], q.width[i], mu, sigma)
		r := jac[(i-win.lo)*m:]
		r[ka] += c.share * g
		if kv >= 0 {
			r[kv] += flux * dmu * scale
			r[ks] += flux * ds * dsigma
		}
	}
}

// span returns the pixels of a window that a profile reaches.
func (q *problem) span(win *window, mu, sigma float64) (lo, hi int) {
	reach := profileReach * sigma
	lo = win.lo + lowerBound(q.lam[win.lo:win.hi], mu-reach)
	hi = win.lo + lowerBound(q.lam[win.lo:win.hi], mu+reach)
	return max(lo-1, win.lo), min(hi+1, win.hi)
}

func lowerBound(x []float64, v float64) int {
	lo, hi := 0, len(x)
	for lo < hi {
		mid := (lo + hi) / 2
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
