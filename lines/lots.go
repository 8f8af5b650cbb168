package lines

import (
	"math"

	"duskline/spectrum"
)

const (
	// averageLots fits for so many tilts, and integrates over so many.
	tiltNodes = 5
	tiltFine  = 48
	// A node takes at most so many steps.
	tiltSteps = 2
	// The tilts reach so many standard errors from the best one.
	tiltReach = 3.0
	// The least part of the square of the width that tilt leaves.
	cramped = 0.3
)

// tiltAt and tiltPlace are the nodes of Chebyshev of averageLots and a finer set between 1 and
// -1, tiltShape the polynomials of Lagrange through the former at the latter.
var tiltAt, tiltPlace, tiltShape = func() (at [tiltNodes]float64, place [tiltFine]float64, shape [tiltFine][tiltNodes]float64) {
	for k := range at {
		at[k] = math.Cos(math.Pi * (float64(k) + 0.5) / tiltNodes)
	}
	for j := range shape {
		place[j] = math.Cos(math.Pi * (float64(j) + 0.5) / tiltFine)
		for k := range at {
			shape[j][k] = 1
			for l := range at {
				if l != k {
					shape[j][k] *= (place[j] - at[l]) / (at[k] - at[l])
				}
			}
		}
	}
	return at, place, shape
}()

// tiltNode is the fit for one tilt.
type tiltNode struct {
	p, cov []float64
	chi2   float64
}

// averageLots replaces the solution of a blend in which tie e has lots, with the
// amplitudes of each equal, by its mean over the posterior in what each line of a lot has
// of the light, and the covariance by that of the posterior. With that held, offset,
// width and sum are as well determined as those of a lone line, so that the fit for each
// node is close to linear. Lines have the parts 1 + t x, with x from -1 to 1 through the
// lot; all t from -1 to 1 are as likely beforehand. Between the nodes chi^2 is
// interpolated, and the posterior exp(-chi^2/2) integrated over the polynomials gives
// their weights. For the law of covariance see marginalize. chi2 of the solution becomes
// that of the best tilt.
func (s *Scratch) averageLots(e *tie) {
	m, g := &s.lm, &s.avg
	g.begin(m)
	chi2, ok := m.chi2, true
	mid, half := s.tiltRange()
	from := 0 // the node nearest to no tilt
	for k, t := range tiltAt {
		if math.Abs(mid+half*t) < math.Abs(mid+half*tiltAt[from]) {
			from = k
		}
	}
	for _, side := range [2]int{-1, 1} {
		copy(m.p, g.start)
		before, went := 0.0, 0.0
		g.slope = resize(g.slope, m.n) // how far the last node was from where tilt had put it
		for k := from + max(side, 0); k >= 0 && k < tiltNodes && ok; k += side {
			t := mid + half*tiltAt[k]
			s.tilt(e, t)
			if went != 0 {
				for i, d := range g.slope {
					m.p[i] = min(max(m.p[i]+d*(t-before)/went, m.lo[i]), m.hi[i])
				}
			}
			g.last = append(g.last[:0], m.p...)
			before, went = t, t-before
			ok = s.settleLots()
			for i, p := range m.p {
				g.slope[i] = p - g.last[i]
				if math.Abs(went) < 0.05 {
					g.slope[i] = 0
				}
			}
			node := &s.tilted[k]
			node.p, node.cov, node.chi2 = append(node.p[:0], m.p...), append(node.cov[:0], m.cov...), m.chi2
		}
	}
	s.tilt(e, 0)
	copy(m.held, g.held)
	copy(m.p, g.start)
	if m.chi2 = chi2; !ok {
		return
	}
	for k, w := range s.tiltWeights() {
		copy(m.p, s.tilted[k].p)
		copy(m.cov, s.tilted[k].cov)
		g.add(m, w)
	}
	g.square = 0
	g.finish(m)
	// A node that has gone astray spoils the polynomials.
	if w := m.p[e.ps]; !(w > 0.5*s.tilted[from].p[e.ps] && w < 2*s.tilted[from].p[e.ps]) || !(m.cov[e.ps*(m.n+1)] >= 0) {
		copy(m.p, s.tilted[from].p)
		copy(m.cov, s.tilted[from].cov)
	}
	e.v, e.s = m.p[e.pv], m.p[e.ps]
}

// tiltRange returns middle and half width of the tilts that may matter: all of them where
// the data say little.
func (s *Scratch) tiltRange() (mid, half float64) {
	lo := max(-1, s.tiltBest-tiltReach*s.tiltErr)
	hi := min(1, s.tiltBest+tiltReach*s.tiltErr)
	return 0.5 * (lo + hi), 0.5 * (hi - lo)
}

// tiltWeights returns the weights of the nodes, and sets chi2 and the scale of the
// average to those of the best tilt.
func (s *Scratch) tiltWeights() (weight [tiltNodes]float64) {
	m, g := &s.lm, &s.avg
	var chi2 [tiltFine]float64
	m.chi2 = math.Inf(1)
	for j := range chi2 {
		for k, l := range tiltShape[j] {
			chi2[j] += l * s.tilted[k].chi2
		}
		m.chi2 = min(m.chi2, chi2[j])
	}
	m.chi2 = max(m.chi2, 0)
	scale := s.errorScale()
	g.scale2 = scale * scale
	for j, x := range chi2 {
		f := math.Exp(-0.5*(x-m.chi2)/g.scale2) * math.Sqrt(1-tiltPlace[j]*tiltPlace[j])
		for k, l := range tiltShape[j] {
			weight[k] += f * l
		}
	}
	return weight
}

// tilt gives the lines of the lots of tie e the parts 1 + t x, and moves offset and width
// to where the light of the first lot keeps its center and its width.
func (s *Scratch) tilt(e *tie, t float64) {
	q, m := &s.prob, &s.lm
	for k := range q.equal {
		if l := &q.equal[k]; q.ties[q.comps[l.first].tie].pv == e.pv {
			l.a, l.b = 1+t*s.placeInLot(l.second), 1+t*s.placeInLot(l.first)
		}
	}
	first := 0
	for i := range q.comps {
		lot := q.comps[i].lot
		if lot == 0 || q.ties[q.comps[i].tie].pv != e.pv || s.lotBefore(i) {
			continue
		}
		var old, fresh light
		flux := 0.0
		for k := range q.comps {
			c := &q.comps[k]
			if c.lot == lot {
				flux += c.share * m.p[c.amp]
				x := spectrum.SpeedOfLight * (c.lam0/q.comps[i].lam0 - 1)
				old.add(x, math.Abs(c.share*m.p[c.amp]))
				fresh.add(x, 1+t*s.placeInLot(k))
			}
		}
		if !(old.sum > 0) {
			continue
		}
		for k := range q.comps {
			if c := &q.comps[k]; c.lot == lot && c.share == 1 {
				m.p[c.amp] = math.Copysign(old.sum/fresh.sum*(1+t*s.placeInLot(k)), flux)
			}
		}
		if first == 0 {
			first = lot
			v, w := old.center(), fresh.center()
			m.p[e.pv] = min(max(m.p[e.pv]+v-w, -e.vmax), e.vmax)
			ss := m.p[e.ps] * m.p[e.ps]
			wide := ss + old.variance() - fresh.variance()
			// All light was in one line, and the new parts lie farther apart than it is wide.
			s.cramped = wide < cramped*ss
			m.p[e.ps] = min(max(math.Sqrt(max(wide, cramped*ss)), e.smin), e.smax)
		}
	}
}

// light has the moments of a set of lines.
type light struct{ sum, v, vv float64 }

func (l *light) add(x, flux float64) {
	l.sum += flux
	l.v += flux * x
	l.vv += flux * x * x
}
func (l *light) center() float64   { return l.v / l.sum }
func (l *light) variance() float64 { return l.vv/l.sum - l.center()*l.center() }

// lotBefore reports whether a component before ci is of the same lot.
func (s *Scratch) lotBefore(ci int) bool {
	for k := range ci {
		if s.prob.comps[k].lot == s.prob.comps[ci].lot {
			return true
		}
	}
	return false
}

// placeInLot returns where a component stands in its lot, from -1 to 1.
func (s *Scratch) placeInLot(ci int) float64 {
	q := &s.prob
	c := &q.comps[ci]
	lo, hi := c.lam0, c.lam0
	for k := range q.comps {
		if o := &q.comps[k]; o.lot == c.lot {
			lo, hi = min(lo, o.lam0), max(hi, o.lam0)
		}
	}
	return (2*c.lam0 - lo - hi) / (hi - lo)
}
