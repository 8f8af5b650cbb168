package lines

import "math"

// What is assumed of the stellar absorption under a Balmer emission line where
// the spectrum does not show it: rest equivalent width and its standard error,
// Angstrom, and Gaussian sigma, km/s. Common practice, no source: populations
// of stars have 1 to 8 Angstrom, old ones 1 to 2.
const (
	stellarEW    = 2.0
	stellarEWErr = 2.0
	stellarSigma = 500.0
)

// allowStellar lets stellar absorption lie under every Balmer emission line
// that was fitted with one component, except in quasars. The profile g of the
// absorption enters as one more linear parameter x with a Gaussian prior. With
// c = J^T W g and the covariance C of the fit,
//
//	x = (g^T W r + mean/err^2) / h, h = g^T W g - c^T C c + 1/err^2,
//
// the parameters move by -C c x and the covariance grows by C c c^T C / h.
func (s *Scratch) allowStellar() {
	q := &s.prob
	if s.opt.Broad {
		return
	}
	for ci := range q.comps {
		c := &q.comps[ci]
		l := s.tracks[c.track].line
		if l.ion == hydrogenIon && l.Wave > 3640 && l.Wave < 6600 && s.lm.p[c.amp] > 0 && q.ties[c.tie].own && s.onlyPart(ci) {
			s.addStellar(ci)
		}
	}
}

func (s *Scratch) onlyPart(ci int) bool {
	for i := range s.prob.comps {
		if i != ci && s.prob.comps[i].track == s.prob.comps[ci].track {
			return false
		}
	}
	return true
}

func (s *Scratch) addStellar(ci int) {
	q, m := &s.prob, &s.lm
	n := m.n
	e := &q.ties[q.comps[ci].tie]
	if e.s > stellarSigma {
		return // as broad as the absorption: the data cannot be split
	}
	cont, known := s.continuumAt(ci, s.errorScale())
	if !known {
		return
	}
	// In units of one Angstrom of rest equivalent width.
	c := &q.comps[ci]
	unit := -cont * (1 + s.opt.Z) / (c.share * m.p[c.amp])
	s.residuals()
	num, den := s.probe(c.tie, ci, e.v, math.Hypot(stellarSigma, e.sres))
	num, den = num*unit, den*unit*unit
	for i := range s.grad {
		s.grad[i] *= unit
	}
	scale := s.errorScale()
	prior := scale * scale / (stellarEWErr * stellarEWErr)
	h := max(den, 0) + prior
	x := max(0, (num+stellarEW*prior)/h)
	for i := range n {
		m.p[i] -= s.grad[i] * x
		for j := range n {
			m.cov[i*n+j] += s.grad[i] * s.grad[j] / h
		}
	}
	m.p[e.ps] = min(max(m.p[e.ps], e.smin), e.smax)
	s.readKinematics()
}
