package lines

import "math"

const (
	// broadOffset is the standard deviation of the offsets of broad lines of one quasar, km/s:
	// C IV against Mg II has a mean of 824 and 511 about it (Richards et al. 2002, AJ 124, 1,
	// from memory); Lyman-alpha loses its blue side to the forest on top.
	broadOffset = 1000.0
	// strayFrom is how many of it a broad line may lie from the strongest one that it
	// overlaps: there it is in the place of that one.
	strayFrom = 2.0
)

// invades reports whether a broad line of its own has gone into the wing of the main one.
func (s *Scratch) invades(k, main int) bool {
	q := &s.prob
	e, m := &q.ties[k], &q.ties[main]
	if !e.broad || !m.broad || math.Abs(e.v-m.v) < strayFrom*broadOffset {
		return false
	}
	for i := range q.comps {
		for j := range q.comps {
			if q.comps[i].tie == k && q.comps[j].tie == main && s.apart(&s.tracks[q.comps[i].track], &s.tracks[q.comps[j].track]) < lonelyWithin*e.s {
				return true
			}
		}
	}
	return false
}

// homeward fits a blend of broad lines that share an offset once more from their own
// places, where that offset may have put one in the place of the other, and keeps the better
// of both by chi^2 and by what broadOffset says. It reports whether that is the new one.
func (s *Scratch) homeward(main int) bool {
	q, m, g := &s.prob, &s.lm, &s.free
	if main < 0 {
		return false
	}
	e := &q.ties[main]
	if !e.own || !e.broad || math.Abs(e.v) < broadOffset || !s.findTight(main) {
		return false
	}
	g.take(s)
	scale := s.errorScale()
	old := m.chi2/(scale*scale) + e.v*e.v/(broadOffset*broadOffset)
	m.p[e.pv], m.p[e.ps] = 0, min(max(math.Hypot(s.opt.guess(true), e.sres), e.smin), e.smax)
	if a := s.anchor[1][0]; e.snr > 0 && a.snr > 0 {
		m.p[e.pv], m.p[e.ps] = a.v, min(max(math.Hypot(a.source, e.sres), e.smin), e.smax)
	}
	q.fixed = m.fixed
	s.fixKinematics(true)
	m.linear(q)
	s.fixKinematics(false)
	ok := true
	if s.boundCrowded() {
		m.minimize(q)
		s.unbound()
		ok = m.covariance()
	} else {
		ok = m.minimize(q)
	}
	s.readKinematics()
	if ok && m.chi2/(scale*scale)+e.v*e.v/(broadOffset*broadOffset) < old-1e-3 {
		return true
	}
	g.give(s)
	return false
}
