package lines

import (
	"math"

	"duskline/spectrum"
)

// quadratic returns g^T C g with the covariance of the fit.
func (m *marquardt) quadratic(g []float64) float64 {
	v := 0.0
	for i, gi := range g {
		if gi == 0 {
			continue
		}
		row := m.cov[i*m.n : i*m.n+m.n]
		for j, gj := range g {
			v += gi * gj * row[j]
		}
	}
	return v
}

// bilinear returns g^T C h.
func (m *marquardt) bilinear(g, h []float64) float64 {
	v := 0.0
	for i, gi := range g {
		if gi == 0 {
			continue
		}
		row := m.cov[i*m.n : i*m.n+m.n]
		for j, hj := range h {
			v += gi * hj * row[j]
		}
	}
	return v
}

// sum is a direct sum over one line.
type sum struct {
	ew, variance float64 // observed frame
	pixels       int
	good         float64 // fraction of the window seen by good pixels
}

// sumWindow sums component ci on one window: W = sum of f_i d_i (1 - D_i), D =
// (F - neighbors) / Fc, where f is the fraction of pixel i inside the sum's
// window, d its width, Fc the continuum with its straight line, and neighbors
// the fitted profiles of the other lines. Masked pixels and missing ones count
// with the fitted profile of the line.
//
// The variance carries the noise of the pixels, the covariance of the fit, and
// the correlation of both, since the fit saw the same pixels: for W = q.F +
// Q.theta with theta linear in F, var = q^T N q + 2 Q^T C J^T q + Q^T C Q.
func (s *Scratch) sumWindow(ci int, win *window) sum {
	q, m := &s.prob, &s.lm
	mu, sigma, _ := q.place(ci, win.arm, m.p)
	c := &q.comps[ci]
	lo, hi := q.span(win, mu, sigma)
	s.grad, s.cross = resize(s.grad, m.n), resize(s.cross, m.n)
	// Pixels widen the profile; the window follows.
	if hi > lo {
		d := q.width[(lo+hi)/2]
		sigma = math.Sqrt(sigma*sigma + d*d/12)
	}
	from, to := mu-SumHalfWidth*sigma, mu+SumHalfWidth*sigma
	flux := c.share * m.p[c.amp]
	var r sum
	seen, profile := 0.0, 0.0
	noise := 0.0
	contMu := 0.0
	for i := lo; i < hi; i++ {
		a, b := q.lam[i]-0.5*q.width[i], q.lam[i]+0.5*q.width[i]
		d := min(b, to) - max(a, from)
		if d <= 0 {
			continue
		}
		x := (q.lam[i] - win.mid) / win.half
		fc := q.cont[i] + m.p[win.base] + m.p[win.base+1]*x
		if !(fc > 0) {
			r.ew = math.NaN()
			return r
		}
		if math.Abs(q.lam[i]-mu) <= 0.75*q.width[i] {
			contMu = fc
		}
		g, dmu, ds := gaussian(q.lam[i], q.width[i], mu, sigmaOf(q, ci, win, m.p))
		profile += g * d
		if q.w[i] == 0 {
			r.ew -= d * flux * g / fc
			s.addOwn(ci, win, -d/fc, flux, g, dmu, ds)
			s.grad[win.base] += d * flux * g / (fc * fc)
			s.grad[win.base+1] += d * flux * g / (fc * fc) * x
			continue
		}
		seen += d
		if d > 0.5*q.width[i] {
			r.pixels++
		}
		qi := -d / fc
		others := s.neighbors(ci, win, i, -qi)
		rel := (q.y[i] + q.cont[i] - others) / fc
		r.ew += d * (1 - rel)
		s.grad[win.base] += d * rel / fc
		s.grad[win.base+1] += d * rel / fc * x
		noise += qi * qi / q.w[i]
		s.crossRow(win, i, x, qi)
	}
	r.good = seen / (to - from)
	// What no pixel covers, and the 0.05 % beyond the window, counts with the
	// profile.
	if lost := 1 - profile; contMu > 0 {
		r.ew -= flux * lost / contMu
		s.grad[c.amp] -= c.share * lost / contMu
	}
	r.variance = noise + 2*m.bilinear(s.grad, s.cross) + m.quadratic(s.grad)
	return r
}

func sigmaOf(q *problem, ci int, win *window, p []float64) float64 {
	_, sigma, _ := q.place(ci, win.arm, p)
	return sigma
}

// addOwn adds factor times the derivative of the component's own profile.
func (s *Scratch) addOwn(ci int, win *window, factor, flux, g, dmu, ds float64) {
	q := &s.prob
	c := &q.comps[ci]
	t := &q.ties[c.tie]
	s.grad[c.amp] += factor * c.share * g
	if t.pv >= 0 {
		_, _, dsigma := q.place(ci, win.arm, s.lm.p)
		s.grad[t.pv] += factor * flux * dmu * c.lam0 / spectrum.SpeedOfLight
		s.grad[t.ps] += factor * flux * ds * dsigma
	}
}

// neighbors returns the sum of the other lines' profiles at pixel i and adds
// factor times its derivatives to the gradient.
func (s *Scratch) neighbors(ci int, win *window, i int, factor float64) float64 {
	q := &s.prob
	total := 0.0
	for k := range q.comps {
		if k == ci {
			continue
		}
		mu, sigma, _ := q.place(k, win.arm, s.lm.p)
		if math.Abs(q.lam[i]-mu) > profileReach*sigma+q.width[i] {
			continue
		}
		g, dmu, ds := gaussian(q.lam[i], q.width[i], mu, sigma)
		flux := q.comps[k].share * s.lm.p[q.comps[k].amp]
		total += flux * g
		s.addOwn(k, win, factor, flux, g, dmu, ds)
	}
	return total
}

// crossRow adds factor times row i of the Jacobian to the correlation of the
// pixels with the parameters.
func (s *Scratch) crossRow(win *window, i int, x, factor float64) {
	q := &s.prob
	s.cross[win.base] += factor
	s.cross[win.base+1] += factor * x
	for k := range q.comps {
		mu, sigma, dsigma := q.place(k, win.arm, s.lm.p)
		if math.Abs(q.lam[i]-mu) > profileReach*sigma+q.width[i] {
			continue
		}
		c := &q.comps[k]
		t := &q.ties[c.tie]
		g, dmu, ds := gaussian(q.lam[i], q.width[i], mu, sigma)
		flux := c.share * s.lm.p[c.amp]
		s.cross[c.amp] += factor * c.share * g
		if t.pv >= 0 {
			s.cross[t.pv] += factor * flux * dmu * c.lam0 / spectrum.SpeedOfLight
			s.cross[t.ps] += factor * flux * ds * dsigma
		}
	}
}

// directSum combines the sums of a component over its windows by inverse
// variance.
func (s *Scratch) directSum(ci int) sum {
	q := &s.prob
	var total sum
	weight := 0.0
	total.ew = math.NaN()
	for i := range q.windows {
		w := &q.windows[i]
		mu, _, _ := q.place(ci, w.arm, s.lm.p)
		if mu < w.mid-w.half || mu > w.mid+w.half {
			continue
		}
		r := s.sumWindow(ci, w)
		if r.good < s.opt.MinGood || !(r.variance > 0) || math.IsNaN(r.ew) {
			continue
		}
		if weight == 0 {
			total.ew = 0
		}
		total.ew += r.ew / r.variance
		weight += 1 / r.variance
		total.pixels += r.pixels
		total.good = max(total.good, r.good)
	}
	if weight > 0 {
		total.ew /= weight
		total.variance = 1 / weight
	} else {
		total.variance = math.NaN()
	}
	return total
}

// Sum returns the equivalent width of the wavelengths from lo to hi,
// 1/(1+z) * integral of (1 - F/Fc) dlambda with the arm's own continuum, its
// standard error from the noise of the pixels and from ContErr, the latter
// taken as one common factor of the whole window, and the fraction of the
// window that good pixels cover. Pixels count with the part of them inside.
// Whatever good pixels do not cover adds nothing: judge by covered. Where no
// good pixel with positive continuum lies inside, ew and err are NaN.
func Sum(a *Arm, lo, hi, z float64) (ew, err, covered float64) {
	a.check()
	var w, noise, cont, seen float64
	for i := max(0, a.index(lo)-1); i < len(a.Wave); i++ {
		p, q := pixelEdges(a.Wave, i)
		if p >= hi {
			break
		}
		d := min(q, hi) - max(p, lo)
		g, c := a.good(i), a.Cont[i]
		if d <= 0 || g == 0 || !(c > 0) {
			continue
		}
		rel := a.Flux[i] / c
		w += d * (1 - rel)
		noise += d * d / (c * c * g)
		if a.ContErr != nil && a.ContErr[i] > 0 {
			cont += d * rel * a.ContErr[i] / c
		}
		seen += d
	}
	if seen == 0 {
		return math.NaN(), math.NaN(), 0
	}
	return w / (1 + z), math.Sqrt(noise+cont*cont) / (1 + z), seen / (hi - lo)
}
