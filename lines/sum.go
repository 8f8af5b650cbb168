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

// bilinear returns g^T C h with the covariance of the linearized fit, which
// alone tells how parameters follow the pixels.
func (m *marquardt) bilinear(g, h []float64) float64 {
	v := 0.0
	for i, gi := range g {
		if gi == 0 {
			continue
		}
		row := m.narrow[i*m.n : i*m.n+m.n]
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
	lo, hi := q.reach(win, mu, sigma)
	left, right := mu, mu
	for k := range q.comps {
		if k != ci && q.inLot(ci, k) {
			other, _, _ := q.place(k, win.arm, m.p)
			left, right = min(left, other), max(right, other)
			l, h := q.reach(win, other, sigma)
			lo, hi = min(lo, l), max(hi, h)
		}
	}
	s.grad, s.cross = resize(s.grad, m.n), resize(s.cross, m.n)
	if s.placedArm != win.arm {
		s.placeAll(win.arm)
		s.placedArm = win.arm
	}
	// Pixels widen the profile; the window follows.
	if hi > lo {
		d := q.width[(lo+hi)/2]
		sigma = math.Sqrt(sigma*sigma + d*d/12)
	}
	from, to := left-SumHalfWidth*sigma, right+SumHalfWidth*sigma
	flux, _ := s.lotFlux(ci, nil, 0)
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
		shape, own, others := s.pixelProfiles(ci, win, i, d/fc, q.w[i] > 0)
		profile += shape * d
		rel := 1 + own/fc
		if q.w[i] > 0 {
			rel = (q.y[i] + q.cont[i] - others) / fc
			seen += d
			if d > 0.5*q.width[i] {
				r.pixels += q.count[i]
			}
			f := d / fc
			noise += f * f / q.w[i]
			s.cross[win.base] -= f
			s.cross[win.base+1] -= f * x
			s.grad[win.base] += d * rel / fc
			s.grad[win.base+1] += d * rel / fc * x
		} else {
			s.grad[win.base] += d * own / (fc * fc)
			s.grad[win.base+1] += d * own / (fc * fc) * x
		}
		r.ew += d * (1 - rel)
	}
	r.good = seen / (to - from)
	// What no pixel covers, and the 0.05 % beyond the window, counts with the
	// profile.
	if lost := 1 - profile; contMu > 0 {
		r.ew -= flux * lost / contMu
		s.lotFlux(ci, s.grad, -lost/contMu)
	}
	r.variance = noise + 2*m.bilinear(s.grad, s.cross) + m.quadratic(s.grad)
	return r
}

// placement is a component on an arm as sums use it.
type placement struct {
	shape       shape
	dsigma, far float64
}

// placeAll fills placed for an arm.
func (s *Scratch) placeAll(arm int) {
	q, p := &s.prob, s.lm.p
	s.placed = s.placed[:0]
	for k := range q.comps {
		mu, sigma, dsigma := q.place(k, arm, p)
		c := &q.comps[k]
		t := &q.ties[c.tie]
		s.placed = append(s.placed, placement{q.shapeOf(t, p, c.lam0, mu, sigma, 1e-3*sigma), dsigma, t.far(p, c.lam0, sigma)})
	}
}

// pixelProfiles returns at pixel i the profile of component ci per unit flux, the
// mean one of its lot, the flux of both, and that of the other lines, and adds their derivatives, times f, to
// the gradient of the sum: those of the neighbors where the pixel is good, that
// of the line itself where the profile stands in for the pixel. A good pixel
// adds its row of the Jacobian to the correlation with the parameters.
func (s *Scratch) pixelProfiles(ci int, win *window, i int, f float64, good bool) (shape, own, others float64) {
	q, p := &s.prob, s.lm.p
	lot := 0.0
	for k := range q.comps {
		c, at := &q.comps[k], &s.placed[k]
		t := &q.ties[c.tie]
		if math.Abs(q.lam[i]-at.shape.mu) > at.far+q.width[i] {
			continue
		}
		if d := q.width[i]; math.Abs(d-at.shape.d) > 0.01*d {
			at.shape = q.shapeOf(t, p, c.lam0, at.shape.mu, at.shape.sigma, d)
		}
		v, dmu, ds, da, db := at.shape.full(q.lam[i])
		flux := c.share * p[c.amp]
		into := 0.0
		switch {
		case q.inLot(ci, k):
			shape += v
			own += flux * v
			lot++
			if !good {
				into = -f
			}
		case good:
			others += flux * v
			into = f
		}
		dmu *= flux * c.lam0 / spectrum.SpeedOfLight
		ds *= flux * at.dsigma
		da *= flux
		if t.pb < 0 {
			da *= c.lam0 / spectrum.SpeedOfLight
		}
		s.grad[c.amp] += into * c.share * v
		if t.pv >= 0 {
			s.grad[t.pv] += into * dmu
			s.grad[t.ps] += into * ds
		}
		if t.pa >= 0 {
			s.grad[t.pa] += into * da
		}
		if t.pb >= 0 {
			s.grad[t.pb] += into * db * flux
		}
		if good {
			s.cross[c.amp] -= f * c.share * v
			if t.pv >= 0 {
				s.cross[t.pv] -= f * dmu
				s.cross[t.ps] -= f * ds
			}
			if t.pa >= 0 {
				s.cross[t.pa] -= f * da
			}
			if t.pb >= 0 {
				s.cross[t.pb] -= f * db * flux
			}
		}
	}
	return shape / max(lot, 1), own, others
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
