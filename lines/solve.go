package lines

import "math"

// maxRounds bounds how often a blend is laid out again after a fit.
const maxRounds = 4

// See standsApart.
const resolvedFrom, resolvedBroad = 2.8, 2.2

// measureBlend fits one blend and writes the results of its lines. A blend in
// which the fit finds nothing after all is marked faint and left for later.
func (s *Scratch) measureBlend(b *blend) {
	s.prob.equal = s.prob.equal[:0]
	main := s.formTies(b)
	ok := false
	for round := range maxRounds {
		s.build(main)
		ok = s.fit(round)
		s.readKinematics()
		if round == maxRounds-1 || !s.revise(main, ok) {
			break
		}
	}
	if ok && !b.faint && s.homeward(main) {
		s.build(main)
		ok = s.fit(maxRounds)
		s.readKinematics()
	}
	if ok && !b.faint {
		s.findUnresolved()
	}
	if !b.faint && !s.anySeen(ok) {
		b.faint = true
		return
	}
	if ok && !b.faint {
		s.split(main)
	}
	s.lm.narrow = append(s.lm.narrow[:0], s.lm.cov...)
	if ok && !b.faint {
		s.marginalize()
		s.allowStellar()
		s.sumBroad()
	}
	s.report(ok)
	if !b.faint && ok {
		s.openBroad()
		s.dropAnchors()
	}
}

// fit solves first for the linear parameters alone, then for all.
func (s *Scratch) fit(round int) bool {
	q, m := &s.prob, &s.lm
	q.fixed = m.fixed
	s.fixKinematics(true)
	ok := m.linear(q)
	own := 0
	for k := range q.ties {
		if q.ties[k].own {
			own++
		}
	}
	if own == 0 {
		return m.covariance() && ok
	}
	if round == 0 {
		s.tryStarts()
	}
	s.fixKinematics(false)
	if !s.boundCrowded() {
		return m.minimize(q)
	}
	m.minimize(q)
	s.unbound()
	return m.covariance()
}

// unbound lifts what boundCrowded has set.
func (s *Scratch) unbound() {
	for i := range s.prob.comps {
		a := s.prob.comps[i].amp
		s.lm.lo[a], s.lm.hi[a] = math.Inf(-1), math.Inf(1)
	}
}

// boundCrowded forbids the amplitudes of crowded lines that share an offset to
// be of the sign that the strongest of them has not, and reports whether there
// are any. Without it two large ones of opposite sign may stand for one line.
func (s *Scratch) boundCrowded() bool {
	q := &s.prob
	any := false
	for k := range q.ties {
		e := &q.ties[k]
		if e.vprior = 0; !e.own || !s.findTight(k) {
			continue
		}
		any = true
		e.vprior = crowdedOffset(e)
		s.boundTight(e)
	}
	return any
}

// crowdedOffset is the standard error that the offset of crowded lines has beforehand.
func crowdedOffset(e *tie) float64 { return e.vmax / 3 }

// boundTight forbids the amplitudes that findTight has listed to be of the sign that
// the strongest line of a tie has not.
func (s *Scratch) boundTight(e *tie) {
	for _, a := range s.avg.tight {
		if e.snr < 0 {
			s.lm.hi[a] = 0
		} else {
			s.lm.lo[a] = 0
		}
	}
}

func (s *Scratch) fixKinematics(fixed bool) {
	q, m := &s.prob, &s.lm
	for k := range q.ties {
		if e := &q.ties[k]; e.own {
			m.fixed[e.pv], m.fixed[e.ps] = fixed, fixed
			if e.pa >= 0 {
				m.fixed[e.pa] = fixed
			}
			if e.pb >= 0 {
				m.fixed[e.pb] = fixed
			}
		}
	}
}

// tryStarts compares, for every ion with a close neighbor, the start that the
// box gave with zero offset and with two smaller widths, each with the best
// amplitudes: boxes mistake a neighbor for the line, and a fit that starts
// there stays there.
func (s *Scratch) tryStarts() {
	q, m := &s.prob, &s.lm
	for k := range q.ties {
		e := &q.ties[k]
		if !e.own || !s.crowded(k) {
			continue
		}
		best, v, w := m.chi2, e.v, e.s
		guess := math.Hypot(s.opt.guess(e.broad), e.sres)
		for _, start := range [4][2]float64{{0, e.s}, {0, guess}, {0, math.Sqrt(guess * e.s)}, {e.v, guess}} {
			x, y := start[0], min(max(start[1], e.smin), e.smax)
			if math.Abs(x-e.v) < 0.25*e.s && math.Abs(y-e.s) < 0.15*e.s {
				continue // where the box is already
			}
			m.p[e.pv], m.p[e.ps] = x, y
			if m.linear(q) && m.chi2 < best {
				best, v, w = m.chi2, x, y
			}
		}
		m.p[e.pv], m.p[e.ps] = v, w
		m.linear(q)
	}
}

// crowded reports whether a line of tie k has another line of the blend within
// the reach of its boxes.
func (s *Scratch) crowded(k int) bool {
	q := &s.prob
	for i := range q.comps {
		for j := range q.comps {
			if i != j && q.comps[i].tie == k &&
				s.apart(&s.tracks[q.comps[i].track], &s.tracks[q.comps[j].track]) < 1000 {
				return true
			}
		}
	}
	return false
}

func (s *Scratch) readKinematics() {
	q := &s.prob
	for k := range q.ties {
		if e := &q.ties[k]; e.pv >= 0 {
			e.v, e.s = s.lm.p[e.pv], s.lm.p[e.ps]
			if e.pa >= 0 {
				e.a = s.lm.p[e.pa]
			}
			if e.pb >= 0 {
				e.b = s.lm.p[e.pb]
			}
		}
	}
}

// tieSNR returns the S/N of the best-determined amplitude of a tie.
func (s *Scratch) tieSNR(k int) float64 {
	q, m := &s.prob, &s.lm
	best := 0.0
	for i := range q.comps {
		if q.comps[i].tie != k {
			continue
		}
		a := q.comps[i].amp
		if v := m.cov[a*m.n+a]; v > 0 {
			best = max(best, math.Abs(m.p[a])/math.Sqrt(v))
		}
		if q.comps[i].lot > 0 {
			if flux, v := s.lotFlux(i, nil, 0); v > 0 {
				best = max(best, math.Abs(flux)/math.Sqrt(v))
			}
		}
	}
	return best
}

func (s *Scratch) anySeen(ok bool) bool {
	if !ok {
		return false
	}
	scale := s.errorScale()
	for k := range s.prob.ties {
		if s.tieSNR(k) >= seenFrom*scale {
			return true
		}
	}
	return false
}

// revise decides after a fit whether the blend must be laid out again: an ion
// that proves strong gets offset and width of its own, one that proves weak
// gives them up, lines turn out resolved or not, or the width has left its
// window.
func (s *Scratch) revise(main int, ok bool) bool {
	q := &s.prob
	if main < 0 || !ok {
		return false
	}
	again := false
	for k := range q.ties {
		e := &q.ties[k]
		if e.own && e.vprior == 0 && s.findTight(k) {
			again = true
		}
		if k == main {
			continue
		}
		snr := s.tieSNR(k)
		switch {
		case !e.own && !e.settled && snr >= ownFrom && s.standsApart(k):
			e.own, e.settled, e.borrowed, again = true, true, false, true
		case e.own && (snr < seenFrom || s.invades(k, main)):
			e.settled, again = true, true
			s.follow(k, main)
		}
	}
	for i := range q.comps {
		if s.outgrown(i) {
			again = true
		}
	}
	return again || s.regrouped()
}

// standsApart reports whether a tie has a line that lies farther than
// resolvedFrom of its sigma from all lines of other ions. Without one, offsets
// and widths of both would be free in one unresolved bump: errors of the
// equivalent widths then come out too small, in simulation by 1.2 at 2.2 sigma and
// up to 1.6 nearer. The errors of broad lines have the doubt of the continuum: resolvedBroad.
func (s *Scratch) standsApart(k int) bool {
	q := &s.prob
	far := resolvedFrom
	if q.ties[k].broad {
		far = resolvedBroad
	}
	for i := range q.comps {
		if q.comps[i].tie != k {
			continue
		}
		alone := true
		for j := range q.comps {
			d := s.apart(&s.tracks[q.comps[i].track], &s.tracks[q.comps[j].track])
			if q.comps[j].tie != k && d < far*q.ties[k].s {
				alone = false
			}
		}
		if alone {
			return true
		}
	}
	return false
}

// outgrown reports whether the sum window of a component, or most of the
// window that its width calls for, has left the fit window, or whether its
// bins have become too wide for it.
func (s *Scratch) outgrown(ci int) bool {
	q := &s.prob
	for i := range q.windows {
		w := &q.windows[i]
		a := &s.arms[w.arm]
		mu, sigma, _ := q.place(ci, w.arm, s.lm.p)
		if mu < w.mid-w.half || mu > w.mid+w.half {
			continue
		}
		if lo, hi := q.reach(w, mu, sigma); hi > lo {
			if k := (lo + hi) / 2; q.count[k] > 1 && q.width[k] > sigma/2 {
				return true
			}
		}
		d := 5 * sigma
		if (mu-d < w.mid-w.half && w.pix0 > 0) || (mu+d > w.mid+w.half && w.pixLimit < len(a.Wave)) {
			return true
		}
	}
	return false
}

// regrouped reports whether the present widths call for other shared
// amplitudes than the fit had.
func (s *Scratch) regrouped() bool {
	q := &s.prob
	for i := range q.comps {
		c := &q.comps[i]
		if i+1 == len(q.comps) || s.tracks[c.track].line.doublet >= 0 {
			continue
		}
		for j := i + 1; j < len(q.comps); j++ {
			d := &q.comps[j]
			if d.tie == c.tie {
				near := s.apart(&s.tracks[c.track], &s.tracks[d.track]) < mergeSame*q.ties[c.tie].s
				if near && d.amp != c.amp || !near && d.amp == c.amp && !q.ties[c.tie].broad {
					return true
				}
				break
			}
		}
	}
	return false
}

// errorScale returns the factor for all errors of the fit: sqrt(chi^2/dof)
// when chi^2/dof lies above 1 by more than three of its standard deviations
// sqrt(2/dof), else 1.
func (s *Scratch) errorScale() float64 {
	q := &s.prob
	used := 0
	for _, w := range q.w {
		if w > 0 {
			used++
		}
	}
	dof := float64(used - s.lm.free)
	if dof < 5 {
		return 1
	}
	if r := s.lm.chi2 / dof; r > 1+3*math.Sqrt(2/dof) {
		return math.Sqrt(r)
	}
	return 1
}

// dropAnchors lends offset and width of the blend's ions to what comes later.
func (s *Scratch) dropAnchors() {
	q := &s.prob
	scale := s.errorScale()
	for k := range q.ties {
		e := &q.ties[k]
		snr := s.tieSNR(k) / scale
		if !e.own || snr < anchorFrom || e.v <= -e.vmax || e.v >= e.vmax || e.s >= e.smax {
			continue
		}
		flux := 0.0
		for i := range q.comps {
			if q.comps[i].tie == k {
				flux += q.comps[i].share * s.lm.p[q.comps[i].amp]
			}
		}
		if e.stark {
			if snr > s.wings.snr {
				s.wings = kinematics{snr, e.v, math.Sqrt(max(0, e.s*e.s-e.sres*e.sres))}
			}
			continue
		}
		class := 0
		if e.broad {
			class = 1
		}
		found := kinematics{snr, e.v, math.Sqrt(max(0, e.s*e.s-e.sres*e.sres))}
		if a := &s.anchor[class][sign(flux)]; snr > a.snr {
			*a = found
		}
		if a := &s.series[sign(flux)]; e.broad && e.ion == hydrogenIon && snr > a.snr {
			*a = found
		}
	}
}
