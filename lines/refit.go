package lines

import "math"

// trapped reports whether of two lines of a lot one may have all the light: that may be a
// fit which has put the one in the place of the other.
func (s *Scratch) trapped() bool {
	q := &s.prob
	for j := range q.comps {
		for i := range j {
			if a, b := &q.comps[i], &q.comps[j]; a.lot > 0 && a.lot == b.lot && s.lonely(a, b) {
				return true
			}
		}
	}
	return false
}

// lonely reports whether one of two components is not seen, or of the other sign.
func (s *Scratch) lonely(a, b *component) bool {
	m := &s.lm
	x, y := m.p[a.amp], m.p[b.amp]
	f := seenFrom * s.errorScale()
	return a.amp != b.amp && (x*y <= 0 || x*x < f*f*m.cov[a.amp*(m.n+1)] || y*y < f*f*m.cov[b.amp*(m.n+1)])
}

const (
	// refit starts with a tilt, see averageLots, of that.
	refitTilt = 0.8
	// Two fits that differ by less of chi^2, three standard errors, are both possible.
	mirrorGain = 9.0
)

// refit looks for a better free fit: from where the one with equal amplitudes is, or, where that is worse than the free
// one, with more light in the lines of that side where the free fit has less. A strong line
// beside a weak one may be taken for that: see choose. The fit
// with equal amplitudes stays the solution.
func (s *Scratch) refit(scale float64) (open bool) {
	q, m := &s.prob, &s.lm
	s.even.take(s)
	held := q.equal
	for k := range q.ties {
		if e := &q.ties[k]; e.own {
			t := 0.0
			if s.even.chi2 > s.free.chi2 {
				t = -math.Copysign(refitTilt, s.freeTilt(e))
			}
			s.tilt(e, t)
		}
	}
	m.linear(q)
	q.equal = nil
	s.boundLots()
	m.minimize(q)
	s.unbound()
	m.covariance()
	s.readKinematics()
	s.sides[0].take(s)
	s.sides[1].copy(&s.free)
	for k := range s.free.ties {
		if e := &s.free.ties[k]; e.vprior == 0 && s.hasLot(k) {
			prior := e.v / crowdedOffset(e)
			s.sides[1].chi2 += prior * prior
		}
	}
	open = s.choose(mirrorGain * scale * scale)
	s.even.give(s)
	q.equal = held
	for k := range q.ties {
		if e := &q.ties[k]; e.own {
			s.tilt(e, 0)
		}
	}
	copy(m.p, s.even.p)
	return open
}

// freeTilt returns where the lines of the lots of tie e have their light in the free fit:
// below 0 on the blue side.
func (s *Scratch) freeTilt(e *tie) float64 {
	sum := 0.0
	for i := range s.prob.comps {
		if c := &s.prob.comps[i]; c.lot > 0 && s.prob.ties[c.tie].pv == e.pv {
			sum += s.placeInLot(i) * math.Abs(c.share*s.free.p[c.amp])
		}
	}
	return sum
}

// choose makes one of the two fits of refit the free one: of those within gain of the
// best chi^2 the one with the least offset, unless it is the same fit but for that. It
// reports whether there is another whose offset is less than twice as large.
func (s *Scratch) choose(gain float64) (open bool) {
	k := 0
	for k < len(s.prob.ties)-1 && !(s.prob.ties[k].own && s.hasLot(k)) {
		k++
	}
	least := math.Inf(1)
	for i := range s.sides {
		least = min(least, s.sides[i].chi2)
	}
	best := -1
	other := func(i int) bool {
		x, y := &s.sides[best].ties[k], &s.sides[i].ties[k]
		return s.sides[i].chi2 < least+gain && math.Abs(x.v-y.v) > 0.5*min(x.s, y.s)
	}
	for i := range s.sides {
		c := &s.sides[i]
		switch {
		case c.chi2 >= least+gain:
		case best < 0, other(i) && math.Abs(c.ties[k].v) < math.Abs(s.sides[best].ties[k].v), !other(i) && c.chi2 < s.sides[best].chi2:
			best = i
		}
	}
	for i := range s.sides {
		if best >= 0 && other(i) && math.Abs(s.sides[best].ties[k].v) > 0.5*math.Abs(s.sides[i].ties[k].v) {
			open = true
		}
	}
	if best == 0 {
		s.free.copy(&s.sides[0])
	}
	return open
}

// boundLots does for the lots what boundCrowded does for crowded lines.
func (s *Scratch) boundLots() {
	q := &s.prob
	for k := range q.ties {
		e := &q.ties[k]
		if !e.own || !s.hasLot(k) {
			continue
		}
		e.vprior = crowdedOffset(e)
		s.avg.tight = s.avg.tight[:0]
		for i := range q.comps {
			if c := &q.comps[i]; c.lot > 0 && q.ties[c.tie].pv == e.pv {
				s.avg.tight = appendNew(s.avg.tight, 0, c.amp)
			}
		}
		s.boundTight(e)
	}
}

// snapshot is a solution of a blend.
type snapshot struct {
	ties   []tie
	p, cov []float64
	held   []bool
	chi2   float64
	free   int
}

// take keeps the solution of the present blend.
func (g *snapshot) take(s *Scratch) {
	q, m := &s.prob, &s.lm
	g.ties, g.p, g.cov, g.held = append(g.ties[:0], q.ties...), append(g.p[:0], m.p...), append(g.cov[:0], m.cov...), append(g.held[:0], m.held...)
	g.chi2, g.free = m.chi2, m.free
}

// copy keeps another one.
func (g *snapshot) copy(o *snapshot) {
	g.ties, g.p, g.cov, g.held = append(g.ties[:0], o.ties...), append(g.p[:0], o.p...), append(g.cov[:0], o.cov...), append(g.held[:0], o.held...)
	g.chi2, g.free = o.chi2, o.free
}

// give makes it the solution again.
func (g *snapshot) give(s *Scratch) {
	q, m := &s.prob, &s.lm
	copy(q.ties, g.ties)
	copy(m.p, g.p)
	copy(m.cov, g.cov)
	copy(m.held, g.held)
	m.chi2, m.free = g.chi2, g.free
}
