package lines

import "math"

const (
	// splitMoves is how far, in units of the width, offset and width may go with one
	// standard error of what one of two lines has at the other's cost: farther, and only the
	// sum of both is reported. Offset and width enter the profile far from linearly then, and
	// the errors of each line do not hold; below they do, in simulation (TestPulls).
	splitMoves = 0.08
	// splitWidth is the power of the width with which that goes for lines 1.5 to 2.6 sigma
	// apart: it is taken for a width that is larger by its standard error, or noise
	// would part lines of low S/N that only look narrow.
	splitWidth = 1.65
	// splitClear is the same in the free fit, below which no closer look is needed:
	// noise may make it half as large as it should be.
	splitClear = 0.4 * splitMoves
	// Lines nearer than this many sigma of both together are looked at: lines
	// of one width nearer than about 3.3 of it.
	nearWithin = 1.8
	// evenWorse is how much worse in chi^2, five standard errors, equal amplitudes must be
	// for a line that is not seen to be told from the other by that alone.
	evenWorse = 25.0
	// Those of which one is not seen are looked at to so many sigma of each.
	lonelyWithin = 3.3
)

// findUnresolved looks for lines that share offset and width and stand so
// close that the data do not tell how much each has, and puts them into lots, which are
// reported as one sum. The fit with free amplitudes cannot decide that: with two amplitudes
// traded for offset and width, its errors depend on where the noise has put it. Offset,
// width and sum of a fit with equal amplitudes are stable, and with one more linear
// parameter, the flux that the one line gives to the other, tell the error to
// expect of that (Cramer-Rao bound). Where lots are left their amplitudes stay equal, else the
// fit is as it was.
func (s *Scratch) findUnresolved() {
	q, m, g := &s.prob, &s.lm, &s.free
	lots := 0
	for j := range q.comps {
		for i := range j {
			if s.maybeUnresolved(i, j) {
				lots++
				s.joinLots(i, j, lots)
			}
		}
	}
	if lots == 0 {
		return
	}
	scale := s.errorScale() // of the free fit: equal parts may not fit
	g.take(s)
	trapped := s.trapped()
	s.startLots()
	m.minimize(q)
	s.readKinematics()
	open := false
	if trapped || m.chi2 < g.chi2 {
		open = s.refit(scale)
	}
	if trapped && !open && m.chi2 > g.chi2+evenWorse*scale*scale {
		// A line that is not there: equal parts describe nothing.
		for i := range q.comps {
			q.comps[i].lot = 0
		}
		q.equal = q.equal[:0]
		g.give(s)
		return
	}
	s.residuals()
	cut, left := false, false
	s.tiltBest, s.tiltErr = 0, 0
	for j := range q.comps {
		for i := range j {
			a, b := &q.comps[i], &q.comps[j]
			if a.lot == 0 || a.lot != b.lot || s.between(i, j) {
				continue
			}
			if !open && s.splitMove(i, j)*scale < splitMoves {
				s.cutLot(i, j)
				cut = true
			}
		}
	}
	for i := range q.comps {
		left = left || q.comps[i].lot > 0
	}
	if left && !cut && s.calm() {
		return
	}
	q.equal = q.equal[:0]
	if g.give(s); left {
		s.startLots()
		s.settleLots()
		s.readKinematics()
	}
}

// calm reports whether no broad line of the blend has an offset and a width of its own.
func (s *Scratch) calm() bool {
	for k := range s.prob.ties {
		if e := &s.prob.ties[k]; e.own && e.broad {
			return false
		}
	}
	return true
}

// settleLots solves for a fit near by, with the ratios in the lots held, and its covariance.
// With broad lines in the blend plain steps may go astray.
func (s *Scratch) settleLots() bool {
	m := &s.lm
	if !s.calm() || s.cramped {
		return m.minimize(&s.prob)
	}
	for range tiltSteps {
		if !m.linear(&s.prob) {
			return false
		}
		if m.gain < nodeGain {
			break
		}
	}
	return m.covariance()
}

// maybeUnresolved reports whether a look at two components is due.
func (s *Scratch) maybeUnresolved(i, j int) bool {
	q, m := &s.prob, &s.lm
	a, b := &q.comps[i], &q.comps[j]
	e := &q.ties[a.tie]
	la, lb := s.tracks[a.track].line, s.tracks[b.track].line
	if a.amp == b.amp && a.assumed && b.assumed && e.pv >= 0 && !e.broad {
		return true
	}
	if a.amp == b.amp || e.pv < 0 || e.pv != q.ties[b.tie].pv || e.broad || e.pa >= 0 || la.doublet >= 0 || lb.doublet >= 0 || a.assumed || b.assumed {
		return false
	}
	x, y := m.p[a.amp], m.p[b.amp]
	va, vb, vab := m.cov[a.amp*m.n+a.amp], m.cov[b.amp*m.n+b.amp], m.cov[a.amp*m.n+b.amp]
	total := x + y
	d := s.apart(&s.tracks[a.track], &s.tracks[b.track])
	if d < lonelyWithin*e.s && s.lonely(a, b) {
		return true
	}
	f := min(max(y/total, 0), 1)
	if !(d < nearWithin*math.Sqrt(e.s*e.s+f*(1-f)*d*d)) {
		return false
	}
	scale := s.errorScale()
	if x*y < 0 && d > crowdedWithin*e.s && min(x*x/va, y*y/vb) > seenFrom*seenFrom*scale*scale {
		return false // of opposite sign, and both seen
	}
	move := math.Hypot(m.cov[a.amp*m.n+e.pv]-m.cov[b.amp*m.n+e.pv], m.cov[a.amp*m.n+e.ps]-m.cov[b.amp*m.n+e.ps])
	return scale*move > splitClear*e.s*math.Sqrt(va+vb-2*vab)
}

// joinLots puts two components, and those that are with them, into one lot.
func (s *Scratch) joinLots(i, j, fresh int) {
	q := &s.prob
	a, b := q.comps[i].lot, q.comps[j].lot
	for k := range q.comps {
		if l := q.comps[k].lot; k == i || k == j || l > 0 && (l == a || l == b) {
			q.comps[k].lot = fresh
		}
	}
}

// between reports whether a component of the lot of two lies between them.
func (s *Scratch) between(i, j int) bool {
	q := &s.prob
	lo, hi := q.comps[i].lam0, q.comps[j].lam0
	if lo > hi {
		lo, hi = hi, lo
	}
	for k := range q.comps {
		if c := &q.comps[k]; c.lot == q.comps[i].lot && c.lam0 > lo && c.lam0 < hi {
			return true
		}
	}
	return false
}

// cutLot parts a lot between two of its components that follow one another.
func (s *Scratch) cutLot(i, j int) {
	q := &s.prob
	lot, cut := q.comps[i].lot, 0.5*(q.comps[i].lam0+q.comps[j].lam0)
	fresh, low, high := 0, 0, 0
	for k := range q.comps {
		c := &q.comps[k]
		fresh = max(fresh, c.lot+1)
		if c.lot == lot && c.lam0 < cut {
			low++
		} else if c.lot == lot {
			high++
		}
	}
	if low < 2 {
		low = 0
	} else {
		low = lot
	}
	if high < 2 {
		high = 0
	} else {
		high = fresh
	}
	for k := range q.comps {
		if c := &q.comps[k]; c.lot == lot {
			if c.lot = high; c.lam0 < cut {
				c.lot = low
			}
		}
	}
}

// equalStiff is the weight, in units of that of the data, with which two amplitudes
// are held equal: they differ by less than 1e-4 of their errors then.
const equalStiff = 1e5

// startLots holds the amplitudes of each lot equal.
func (s *Scratch) startLots() {
	q, m := &s.prob, &s.lm
	q.equal = q.equal[:0]
	for j := range q.comps {
		for i := range j {
			if a, b := &q.comps[i], &q.comps[j]; a.lot > 0 && a.lot == b.lot && a.amp != b.amp && !s.between(i, j) {
				q.equal = append(q.equal, equality{i, j, a.amp, b.amp, 1, 1, equalStiff * (m.a[a.amp*(m.n+1)] + m.a[b.amp*(m.n+1)])})
			}
		}
	}
	for k := range q.ties {
		if e := &q.ties[k]; e.own {
			s.tilt(e, 0)
		}
	}
}

// splitMove returns how far offset and width go, in units of the width, with
// one standard error of the flux that one of two components may give to the other;
// infinite when the data say nothing of that.
func (s *Scratch) splitMove(i, j int) float64 {
	q := &s.prob
	own := &q.ties[q.comps[i].tie]
	s.bumps = s.bumps[:0]
	for n, k := range [2]int{i, j} {
		c := &q.comps[k]
		e := &q.ties[c.tie]
		s.bumps = append(s.bumps, bump{c.lam0, e.v, e.s, float64(1 - 2*n)})
	}
	if _, h := s.probeWith(s.bumps); h > 0 {
		wide := 1 + splitWidth*math.Sqrt(s.lm.cov[own.ps*(s.lm.n+1)])*s.errorScale()/own.s
		s.noteTilt(i, j, h)
		return wide * math.Hypot(s.grad[own.pv], s.grad[own.ps]) / (own.s * math.Sqrt(h))
	}
	return math.Inf(1)
}

// noteTilt keeps the tilt that two lines of a lot have in the free fit, and its standard error:
// that of the free fit or that of the fit with equal amplitudes, 1/sqrt(h) for the flux
// that the one gives to the other, whichever is larger.
func (s *Scratch) noteTilt(i, j int, h float64) {
	q, m, g := &s.prob, &s.lm, &s.free
	if q.comps[i].lam0 > q.comps[j].lam0 {
		i, j = j, i
	}
	a, b := q.comps[i].amp, q.comps[j].amp
	x, y := g.p[a], g.p[b]
	total := m.p[a] + m.p[b]
	n, scale := m.n, s.errorScale()
	v := y*y*g.cov[a*(n+1)] + x*x*g.cov[b*(n+1)] - 2*x*y*g.cov[a*n+b]
	s.tiltErr = max(s.tiltErr, 2*math.Sqrt(max(0, v))/(total*total), 2*scale/(math.Abs(total)*math.Sqrt(h)))
	s.tiltBest = min(max((y-x)/total, -1), 1)
}

// lotCarrier returns the component that carries the sum of the lot of ci: the line
// whose ion shows itself best elsewhere in the spectrum, then the strongest by
// oscillator strength, then the first.
func (s *Scratch) lotCarrier(ci int) int {
	q := &s.prob
	best, support := -1, 0.0
	lot := q.comps[ci].lot
	if k := s.leadOf(lot); k >= 0 {
		return k
	}
	flux, _ := s.lotFlux(ci, nil, 0)
	for k := range q.comps {
		c := &q.comps[k]
		if c.lot != lot {
			continue
		}
		t := &s.tracks[c.track]
		x := s.support(t, flux, lot)
		if best < 0 || x > support || x == support && t.line.F > s.tracks[q.comps[best].track].line.F {
			best, support = k, x
		}
	}
	return best
}

// trackInLot reports whether a track has a component in a lot.
func (s *Scratch) trackInLot(track, lot int) bool {
	for i := range s.prob.comps {
		if c := &s.prob.comps[i]; c.track == track && c.lot == lot {
			return true
		}
	}
	return false
}

// hasLot reports whether a line of tie k is reported as part of a sum.
func (s *Scratch) hasLot(k int) bool {
	for i := range s.prob.comps {
		if c := &s.prob.comps[i]; c.lot > 0 && s.prob.ties[c.tie].pv == s.prob.ties[k].pv {
			return true
		}
	}
	return false
}

// lotFlux returns the flux that component ci reports, with that of its lot, and
// the variance; it adds f times the derivatives to grad.
func (s *Scratch) lotFlux(ci int, grad []float64, f float64) (flux, variance float64) {
	q, m := &s.prob, &s.lm
	for k := range q.comps {
		if !q.inLot(ci, k) {
			continue
		}
		a := &q.comps[k]
		flux += a.share * m.p[a.amp]
		if grad != nil {
			grad[a.amp] += f * a.share
		}
		for l := range q.comps {
			if b := &q.comps[l]; q.inLot(ci, l) {
				variance += a.share * b.share * m.cov[a.amp*m.n+b.amp]
			}
		}
	}
	return flux, variance
}

// inLot reports whether component k is reported with component ci.
func (q *problem) inLot(ci, k int) bool {
	return k == ci || q.comps[ci].lot > 0 && q.comps[k].lot == q.comps[ci].lot
}
