package lines

import (
	"math"

	"duskline/spectrum"

	"gonum.org/v1/gonum/floats"
)

const (
	// splitSNR is the S/N of an ion in a blend from which a second component
	// is looked for.
	splitSNR = 8.0
	// A second component stays when it lowers chi^2, in units of the
	// chi^2/dof that is left, by splitGain and by splitCost times the
	// logarithm of the number of pixels: four times the price of three
	// parameters in the criterion of Schwarz (1978), because neither
	// profiles nor continuum are as simple as the model.
	splitGain = 30.0
	splitCost = 12.0
	// Stellar absorption under nebular emission is expected in every galaxy:
	// there the plain price of that criterion is asked.
	splitStellar = 3.0
	// Both components stand above so many of their errors, stellar absorption
	// above seenFrom.
	splitSeen = 5.0
	// The broader one is at least so many times as wide as the other.
	splitWider = 1.5
	// Beyond that part of its range a width is at its limit.
	widest = 0.98
)

// split looks for a second component of every ion with offset and width of its
// own: stellar absorption under nebular emission, wings of outflows, a broad
// line under a narrow one. A cheap look at the residuals comes first, the fit
// only where they call for it.
func (s *Scratch) split(main int) {
	q := &s.prob
	for k := len(q.ties) - 1; k >= 0; k-- {
		e := &q.ties[k]
		if !e.own || e.pa >= 0 || e.vprior > 0 || s.hasLot(k) || s.tieSNR(k) < splitSNR*s.errorScale() {
			continue
		}
		if w, v, ok := s.secondStart(k); ok {
			s.trySecond(main, k, v, w)
		}
	}
}

// secondStart returns the width and offset at which a second component of tie
// k takes most from chi^2 to first order, and whether that is worth a fit.
func (s *Scratch) secondStart(k int) (width, offset float64, ok bool) {
	q := &s.prob
	e := q.ties[k]
	s.residuals()
	least := 0.5 * splitGain
	if e.ion == hydrogenIon && !s.opt.Broad {
		// Of 4,000 simulated cores that gained less than 20 none was kept.
		least = min(least, splitStellar*math.Log(s.goodPixels()))
	}
	starts := [5][2]float64{{0.5 * e.s, e.v}, {2 * e.s, e.v}, {3.5 * e.s, e.v}, {6 * e.s, 0}}
	n := 4
	if a := s.anchor[0][0]; a.snr > 0 {
		starts[n] = [2]float64{math.Hypot(a.source, e.sres), a.v}
		n++
	}
	for _, st := range starts[:n] {
		w := min(max(st[0], e.smin), e.smax)
		if w > e.s/splitWider && w < splitWider*e.s {
			continue
		}
		if num, h := s.probe(k, -1, st[1], w); h > 0 && num*num/h > least {
			least, width, offset, ok = num*num/h, w, st[1], true
		}
	}
	return width, offset, ok
}

// probe adds one linear parameter to the fit, to first order: a copy g of the
// lines of tie k, or of component only if that is not negative, at another
// offset and width, as strong as they. With the residuals r, c = J^T W g and the
// covariance C of the fit it returns num = g^T W r and h = g^T W g - c^T C c: the
// parameter would be num/h with the variance 1/h, and lower chi^2 by num^2/h.
// C c is left in grad. A call of residuals must have come before.
func (s *Scratch) probe(k, only int, v, w float64) (num, h float64) {
	q := &s.prob
	s.bumps = s.bumps[:0]
	for ci := range q.comps {
		if c := &q.comps[ci]; c.tie == k && (only < 0 || ci == only) {
			s.bumps = append(s.bumps, bump{c.lam0, v, w, c.share * s.lm.p[c.amp]})
		}
	}
	return s.probeWith(s.bumps)
}

// bump is a Gaussian of an offset, a width and a flux.
type bump struct{ lam0, v, s, flux float64 }

// probeWith does what probe says for any sum of Gaussians.
func (s *Scratch) probeWith(bumps []bump) (num, h float64) {
	q, m := &s.prob, &s.lm
	n := m.n
	s.cross, s.grad = resize(s.cross, n), resize(s.grad, n)
	for wi := range q.windows {
		win := &q.windows[wi]
		np := win.hi - win.lo
		s.copy = resize(s.copy, np)
		from, to := np, 0
		for _, b := range bumps {
			mu, sigma := b.lam0*(1+b.v/spectrum.SpeedOfLight), b.lam0*b.s/spectrum.SpeedOfLight
			lo, hi := q.reach(win, mu, 0.8*sigma)
			f := b.flux * invSqrt2Pi / sigma
			for i := lo; i < hi; i++ {
				u := (q.lam[i] - mu) / sigma
				s.copy[i-win.lo] += f * decay(0.5*u*u)
			}
			if lo < hi {
				from, to = min(from, lo-win.lo), max(to, hi-win.lo)
			}
		}
		if from >= to {
			continue
		}
		act, cols := q.act[win.act0:win.act1], s.jac[s.jacAt[wi]:]
		for i := from; i < to; i++ {
			s.copy[i] *= q.root[win.lo+i]
			num += s.copy[i] * s.left[win.lo+i]
			h += s.copy[i] * s.copy[i]
		}
		for a, param := range act {
			s.cross[param] += floats.Dot(cols[a*np+from:a*np+to], s.copy[from:to])
		}
	}
	for i := range n {
		s.grad[i] = floats.Dot(m.cov[i*n:i*n+n], s.cross)
	}
	return num, h - floats.Dot(s.cross, s.grad)
}

// residuals fills left with data minus model of every pixel of the blend, times
// the root of its weight, and
// jac with the columns of the Jacobian, those of a window from jacAt on.
func (s *Scratch) residuals() {
	q, p := &s.prob, s.lm.p
	s.left = append(s.left[:0], q.yroot...)
	s.jac, s.jacAt = s.jac[:0], s.jacAt[:0]
	for wi := range q.windows {
		win := &q.windows[wi]
		act := q.act[win.act0:win.act1]
		np := win.hi - win.lo
		s.jacAt = append(s.jacAt, len(s.jac))
		if np == 0 {
			continue
		}
		q.jacobian(win, p, act)
		s.jac = append(s.jac, q.cols...)
		for k := range 2 + win.nAmp {
			sp := q.spans[k]
			for i := sp.lo; i < sp.hi; i++ {
				s.left[win.lo+i] -= p[act[k]] * q.cols[k*np+i]
			}
		}
	}
}

// trySecond fits the blend with a second component of tie k and keeps it if
// the criterion holds; else the blend is as it was.
func (s *Scratch) trySecond(main, k int, v, w float64) {
	q, m := &s.prob, &s.lm
	old := m.chi2
	pixels := s.goodPixels()
	ties, comps := len(q.ties), len(q.comps)
	first := q.ties[k]
	second := first
	second.stark = false
	q.ties[k].like, second.like = kinship{}, kinship{}
	second.v, second.s = min(max(v, -first.vmax), first.vmax), w
	q.ties = append(q.ties, second)
	for i := range comps {
		if c := q.comps[i]; c.tie == k {
			c.tie, c.part = ties, 1
			q.comps = append(q.comps, c)
		}
	}
	s.build(main)
	q.fixed = m.fixed
	s.fixKinematics(true)
	ok := m.linear(q)
	s.fixKinematics(false)
	ok = m.minimize(q) && ok
	s.readKinematics()
	scale := s.errorScale()
	a, b := &q.ties[k], &q.ties[ties]
	wider, slimmer := max(a.s, b.s), min(a.s, b.s)
	need, seen := max(splitGain, splitCost*math.Log(pixels)), splitSeen
	if s.stellar(k, ties) {
		need, seen = splitStellar*math.Log(pixels), seenFrom
	}
	// What is as wide as may be even alone hides nothing of its narrow part.
	held := first.s > widest*first.smax && slimmer < first.s/splitWider
	if ok && (old-m.chi2)/(scale*scale) > need && wider > splitWider*slimmer && (held || wider < widest*a.smax) &&
		math.Min(s.standing(k, scale), s.standing(ties, scale)) > seen {
		if a.s > b.s {
			for i := range q.comps {
				if c := &q.comps[i]; c.tie == k || c.tie == ties {
					c.part = 1 - c.part
				}
			}
		}
		return
	}
	q.ties, q.comps = q.ties[:ties], q.comps[:comps]
	q.ties[k] = first
	s.build(main)
	q.fixed = m.fixed
	s.fixKinematics(true)
	m.linear(q)
	s.fixKinematics(false)
	m.chi2 = q.normal(m.p, m.a, m.b)
	m.covariance()
}

// goodPixels returns the number of pixels of the blend that count.
func (s *Scratch) goodPixels() float64 {
	n := 0.0
	for _, w := range s.prob.w {
		if w > 0 {
			n++
		}
	}
	return n
}

// standing returns the S/N of tie k with the doubt of the continuum in the error:
// iron under a broad line is else a second component of it.
func (s *Scratch) standing(k int, scale float64) float64 {
	q, m := &s.prob, &s.lm
	best := 0.0
	for i := range q.comps {
		if c := &q.comps[i]; c.tie == k {
			if v := m.cov[c.amp*m.n+c.amp]; v > 0 {
				best = max(best, math.Abs(m.p[c.amp])/math.Hypot(scale*math.Sqrt(v), s.continuumDoubt(i)))
			}
		}
	}
	return best
}

// stellar reports whether of two ties of a Balmer line the broader one absorbs
// and the other emits.
func (s *Scratch) stellar(k, l int) bool {
	q := &s.prob
	if q.ties[k].ion != hydrogenIon || s.opt.Broad {
		return false
	}
	if q.ties[k].s < q.ties[l].s {
		k, l = l, k
	}
	return s.tieFlux(k) < 0 && s.tieFlux(l) > 0
}

// tieFlux returns the sum of the amplitudes of a tie's lines.
func (s *Scratch) tieFlux(k int) float64 {
	q := &s.prob
	flux := 0.0
	for i := range q.comps {
		if q.comps[i].tie == k {
			flux += s.lm.p[q.comps[i].amp]
		}
	}
	return flux
}
