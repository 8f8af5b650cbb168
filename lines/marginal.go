package lines

import "math"

const (
	// Lines of one offset and width nearer than this many sigma are crowded
	// enough for marginalize, and weaker than crowdedSNR weak enough.
	crowdedWithin = 2.7
	crowdedSNR    = 80.0
	// tightPower is the power of the width in the weight of a node for crowded lines: flat
	// in depths, not in areas, would be 2. It leaves the least bias in simulation.
	tightPower = 3.0
	// loneSNR is the S/N below which the error of a lone line is that of the posterior.
	loneSNR  = 7.0
	loneStep = 1.5
	// Nodes of marginalize lie gridStep standard errors apart: the trapezoid
	// rule with that step integrates a Gaussian to 5e-4. They end where chi^2
	// has grown by gridDrop, or after so many steps.
	gridStep  = 1.4
	gridDrop  = 12.0
	gridSteps = 10
	// nodeGain: a node is solved by a step that promises less of chi^2, and leaves
	// less than a tenth of that.
	nodeGain = 0.03
)

// average holds the moments of the parameters over the grid of marginalize.
type average struct {
	start, mean, second []float64
	held                []bool
	slope, last         []float64 // of the parameters by the width, and where the last node was
	weight              float64
	square              float64 // sum of the squares of the weights
	tight               []int   // amplitudes of crowded lines
	sign                float64
	scale2              float64 // square of the factor for all errors
}

// marginalize replaces the solution of a blend by its mean over the posterior,
// and the covariance by that of the posterior, for every offset and width that
// crowded lines share. Two lines nearer than their widths have amplitudes that
// are far from linear in the common width: the covariance at the best fit then
// understates their errors, in simulation by up to 1.4. Of lots see averageLots. Of a faint
// line alone, or with clear neighbors, only the covariance changes: that of the fit is
// 4 % too small at S/N 6.
//
// On a grid of widths s the other parameters are solved for. By the law of total
// covariance C = <C(node)> + <(p - <p>)(p - <p>)^T>. A node weighs exp(-chi^2/2)
// s^-tightPower dln s. As in the fit, crowded lines that share an offset
// have one sign; errors are those of free amplitudes. Broad lines of quasars stay as fitted:
// their errors are mostly the doubt of the continuum, and with several ions in one
// blend the grid wanders between solutions (TestQuasarLines).
func (s *Scratch) marginalize() {
	q := &s.prob
	for k := range q.ties {
		e := &q.ties[k]
		if !e.own || e.broad {
			continue
		}
		snr := s.tieSNR(k) / s.errorScale()
		switch {
		case len(q.equal) > 0 && s.hasLot(k):
			s.averageLots(e)
		case s.findTight(k):
			if snr < crowdedSNR {
				s.averageTie(e)
			}
		case snr >= seenFrom && snr < loneSNR && !e.stark && e.pa < 0 && s.onlyOwn(k):
			s.widenLone(e)
		}
	}
}

// onlyOwn reports whether all lines of the blend share the offset and width of tie k.
func (s *Scratch) onlyOwn(k int) bool {
	for i := range s.prob.ties {
		if s.prob.ties[i].own && i != k {
			return false
		}
	}
	return true
}

// findTight lists the amplitudes of lines that follow tie k and lie nearer than
// crowdedWithin to another such line, and reports whether there are any.
func (s *Scratch) findTight(k int) bool {
	q := &s.prob
	pv := q.ties[k].pv
	s.avg.tight = s.avg.tight[:0]
	for i := range q.comps {
		for j := range q.comps {
			a, b := &q.comps[i], &q.comps[j]
			if a.amp != b.amp && q.ties[a.tie].pv == pv && q.ties[b.tie].pv == pv &&
				s.apart(&s.tracks[a.track], &s.tracks[b.track]) < crowdedWithin*q.ties[k].s {
				s.avg.tight = appendNew(s.avg.tight, 0, a.amp)
			}
		}
	}
	return len(s.avg.tight) > 0
}

func (s *Scratch) averageTie(e *tie) {
	m, g := &s.lm, &s.avg
	n := m.n
	ss := m.cov[e.ps*n+e.ps]
	if !(ss > 0) {
		return // held at a bound
	}
	chi2, scale := m.chi2, s.errorScale()
	g.begin(m)
	g.scale2 = scale * scale
	g.sign = 1
	if e.snr < 0 {
		g.sign = -1
	}
	m.fixed[e.ps] = true
	step := min(gridStep*math.Sqrt(ss)/e.s, 0.3)
	g.slope = g.slope[:0]
	for i := range n {
		g.slope = append(g.slope, m.cov[i*n+e.ps]/ss)
	}
	for _, side := range [2]int{1, -1} {
		copy(m.p, g.start)
		g.last = append(g.last[:0], g.start...)
		for i := min(side, 0); i*side <= gridSteps; i += side {
			w := e.s * math.Exp(float64(i)*step)
			if w < e.smin || w > e.smax {
				break
			}
			g.predict(m, e.ps, w)
			g.bound(m, 0)
			// The second step starts near, the third knows what the first
			// put at a bound.
			solved := true
			for k := 0; k < 3 && solved; k++ {
				solved = m.linear(&s.prob)
				if m.gain < nodeGain || m.chi2-chi2 > 2*gridDrop*g.scale2 {
					break
				}
			}
			if !solved {
				break
			}
			drop := (m.chi2 - chi2) / g.scale2
			if drop > gridDrop {
				break
			}
			g.bound(m, math.Inf(1))
			if m.covariance() {
				g.add(m, math.Exp(-drop/2)*math.Pow(w/e.s, -tightPower))
			}
		}
	}
	g.bound(m, math.Inf(1))
	m.fixed[e.ps] = false
	copy(m.held, g.held)
	m.chi2 = chi2
	g.finish(m)
	e.v, e.s = m.p[e.pv], m.p[e.ps]
}

// begin starts a grid at the present solution.
func (g *average) begin(m *marquardt) {
	g.start = append(g.start[:0], m.p...)
	g.held = append(g.held[:0], m.held...)
	g.mean, g.second = resize(g.mean, m.n), resize(g.second, m.n*m.n)
	g.weight, g.square = 0, 0
}

// widenLone replaces the covariance by that of the posterior in the width, with weight
// exp(-chi^2/2) dln s. Two nodes to either side of the fit, loneStep standard errors apart,
// give a Gaussian 0.994 of its variance.
func (s *Scratch) widenLone(e *tie) {
	m, g := &s.lm, &s.avg
	n := m.n
	ss := m.cov[e.ps*n+e.ps]
	if !(ss > 0) {
		return // held at a bound
	}
	chi2, scale := m.chi2, s.errorScale()
	g.begin(m)
	g.scale2 = scale * scale
	g.add(m, 1)
	g.slope = g.slope[:0]
	for i := range n {
		g.slope = append(g.slope, m.cov[i*n+e.ps]/ss)
	}
	// With the width given the covariance of the fit is that much smaller.
	for i := range n {
		for j := range n {
			g.second[i*n+j] -= g.slope[i] * g.slope[j] * ss
		}
	}
	step := min(loneStep*math.Sqrt(ss)/e.s, 0.4)
	m.fixed[e.ps] = true
	for _, side := range [2]float64{1, -1} {
		copy(m.p, g.start)
		g.last = append(g.last[:0], g.start...)
		for k := 1.0; k < 3; k++ {
			w := e.s * math.Exp(side*k*step)
			if w < e.smin || w > e.smax {
				break
			}
			g.predict(m, e.ps, w)
			if !m.linear(&s.prob) || !m.covariance() {
				break
			}
			g.add(m, math.Exp(0.5*(chi2-m.chi2)/g.scale2))
		}
	}
	m.fixed[e.ps] = false
	copy(m.held, g.held)
	m.chi2 = chi2
	g.square = 0
	g.finish(m)
	copy(m.p, g.start)
}

// predict moves the parameters to where those of a node of the width w should lie: on the
// tangent of the covariance from the best fit, then on the line through the last two nodes.
func (g *average) predict(m *marquardt, ps int, w float64) {
	before, now := g.last[ps], m.p[ps]
	for i, x := range m.p {
		slope := g.slope[i]
		if before != now {
			slope = (x - g.last[i]) / (now - before)
		}
		g.last[i] = x
		if m.p[i] += slope * (w - now); i != ps {
			m.p[i] = min(max(m.p[i], m.lo[i]), m.hi[i])
		}
	}
	m.p[ps] = w
}

// bound forbids the crowded amplitudes to lie more than so far on the wrong side
// of zero.
func (g *average) bound(m *marquardt, far float64) {
	for _, a := range g.tight {
		if g.sign > 0 {
			m.lo[a], m.hi[a] = -far, math.Inf(1)
		} else {
			m.lo[a], m.hi[a] = math.Inf(-1), far
		}
	}
}

// add takes in the parameters of a node and their covariance.
func (g *average) add(m *marquardt, weight float64) {
	g.weight += weight
	g.square += weight * weight
	for i, p := range m.p {
		d := p - g.start[i]
		g.mean[i] += weight * d
		row, cov := g.second[i*m.n:(i+1)*m.n], m.cov[i*m.n:(i+1)*m.n]
		for j := range row {
			row[j] += weight * (cov[j] + d*(m.p[j]-g.start[j])/g.scale2)
		}
	}
}

// finish writes mean and covariance into the solution; where one node has
// most of the weight, and says nothing of a spread, the solution stays. For a
// Gaussian the effective number of nodes is 2.5.
func (g *average) finish(m *marquardt) {
	copy(m.p, g.start)
	if !(g.weight*g.weight > 1.5*g.square) {
		return
	}
	for i := range g.mean {
		g.mean[i] /= g.weight
	}
	for i := range g.mean {
		m.p[i] += g.mean[i]
		for j := range g.mean {
			m.cov[i*m.n+j] = g.second[i*m.n+j]/g.weight - g.mean[i]*g.mean[j]/g.scale2
		}
	}
}
