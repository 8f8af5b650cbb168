package lines

import "math"

// What is assumed of the stellar absorption under a Balmer emission line where
// the spectrum does not show it: rest equivalent width and its standard error,
// Angstrom, and Gaussian sigma, km/s, any of them. Common practice, no source:
// populations of stars have 1 to 8 Angstrom, old ones 1 to 2; the lines of cool
// stars are as wide as their velocities, those of hot ones three times as wide.
const (
	stellarEW    = 2.0
	stellarEWErr = 2.0
)

var stellarSigma = [3]float64{150, 300, 500}

// stellarGuess is absorption of one of the widths as one more linear parameter.
type stellarGuess struct {
	x, h, weight float64
	move         []float64 // of the parameters per unit of it
}

// allowStellar lets stellar absorption lie under every Balmer emission line
// that was fitted with one component, except in quasars. The profile g of the
// absorption enters as one more linear parameter x with a Gaussian prior. With
// c = J^T W g and the covariance C of the fit,
//
//	x = (g^T W r + mean/err^2) / h, h = g^T W g - c^T C c + 1/err^2,
//
// the parameters move by -C c x and the covariance grows by C c c^T C / h. The
// widths of stellarSigma count by their evidence, h^(-1/2) exp(h x^2/2) by the
// prior's, and the covariance also has what they differ by.
func (s *Scratch) allowStellar() {
	q := &s.prob
	if s.opt.Broad {
		return
	}
	for ci := range q.comps {
		c := &q.comps[ci]
		l := s.tracks[c.track].line
		if l.ion == hydrogenIon && l.Wave > 3640 && l.Wave < 6600 && s.lm.p[c.amp] > 0 && q.ties[c.tie].own && c.lot == 0 && s.onlyPart(ci) {
			c.snr = s.lm.p[c.amp] / (s.errorScale() * math.Sqrt(s.lm.cov[c.amp*s.lm.n+c.amp]))
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
	c := &q.comps[ci]
	e := &q.ties[c.tie]
	scale := s.errorScale()
	cont, known := s.continuumAt(ci, scale)
	if !known || e.s > stellarSigma[len(stellarSigma)-1] {
		return // as broad as the absorption: the data cannot be split
	}
	// In units of one Angstrom of rest equivalent width.
	unit := -cont * (1 + s.opt.Z) / (c.share * m.p[c.amp])
	prior := scale * scale / (stellarEWErr * stellarEWErr)
	s.residuals()
	best := math.Inf(-1)
	for k, width := range stellarSigma {
		g := &s.guesses[k]
		num, den := s.probe(c.tie, ci, e.v, math.Hypot(max(width, e.s), e.sres))
		num, den = num*unit, den*unit*unit
		g.move = g.move[:0]
		for _, d := range s.grad[:n] {
			g.move = append(g.move, -unit*d)
		}
		g.h = max(den, 0) + prior
		free := (num + stellarEW*prior) / g.h
		g.x = max(0, free)
		g.weight = 0.5*g.h*free*free/(scale*scale) - 0.5*math.Log(g.h)
		best = max(best, g.weight)
	}
	total := 0.0
	for k := range s.guesses {
		g := &s.guesses[k]
		g.weight = math.Exp(g.weight - best)
		total += g.weight
	}
	s.cross = resize(s.cross, n) // the mean step
	for k := range s.guesses {
		g := &s.guesses[k]
		g.weight /= total
		for i, d := range g.move {
			s.cross[i] += g.weight * g.x * d
		}
	}
	for k := range s.guesses {
		g := &s.guesses[k]
		for i := range n {
			for j := range n {
				m.cov[i*n+j] += g.weight * (g.move[i]*g.move[j]/g.h +
					(g.x*g.move[i]-s.cross[i])*(g.x*g.move[j]-s.cross[j])/(scale*scale))
			}
		}
	}
	for i, d := range s.cross {
		m.p[i] += d
	}
	m.p[e.ps] = min(max(m.p[e.ps], e.smin), e.smax)
	s.readKinematics()
}
