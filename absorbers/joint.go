package absorbers

import "math"

const (
	// Standard errors of what is known beforehand: gain, tilt and bend of the
	// level in the window of a line, and the logarithm of the Doppler parameter.
	gainPrior, tiltPrior, bendPrior, lnBPrior = 0.12, 0.12, 0.12, 0.4
	// shapes is the number of parameters of the level in a window.
	shapes = 3
	// flankKms is how much of the level beside a damped line takes part in
	// the fit, each way.
	flankKms = 1500.0
	// Bounds of the fit.
	lowestLogN, highestLogN = 18.5, 22.5
	mostShift               = 800.0
	// columnFloor is the standard error of log N from what the model leaves
	// out, mostly thin lines crowding at the edge of a damped one: with it the
	// errors hold in simulation.
	columnFloor = 0.04
	// keepLogN is the least column that is reported from damped lines.
	keepLogN = 19.3
	// poorFrom is the chi^2/dof from which a fit is called poor.
	poorFrom = 1.7
)

// joint is a fit of systems whose windows overlap.
type joint struct {
	members []int // indices into damp.found
	windows []jointWindow
	p, best []float64 // per member x, log N, ln b; then per window gain, tilt, bend
	model   []float64 // of the bins of all windows
	shade   []float64 // transmission alone
	moved   []float64 // model with one parameter moved
	deriv   []float64 // derivatives, a row a parameter
	weight  []float64
	a, b    []float64
	chol    []float64
	step    []float64
	cov     []float64
}

// jointWindow is a range of bins with gain, tilt and bend of its own.
type jointWindow struct {
	lo, hi int
	at     int // first bin in model
}

// fitClouds fits system k and all that overlap it. It reports whether the
// system stands; others keep their old values if not.
func (s *Scratch) fitClouds(f *Finder, k int) bool {
	d, j := &s.damp, &s.joint
	s.gather(f, k)
	before := append(s.saved[:0], d.found...)
	s.saved = before
	ok := s.solveJoint(f)
	c := &d.found[k]
	ok = ok && c.logN >= d.least && c.nErr < 1 && s.gainOf(f, k) > keepGain
	if !ok {
		copy(d.found, before)
		return false
	}
	chi2, dof := s.describe(f)
	for _, m := range j.members {
		d.found[m].chi2, d.found[m].dof = chi2, max(1, dof-float64(3*len(j.members)))
		d.found[m].lap = len(j.members) > 1
		lo, hi := s.lineWindow(f, d.found[m], 0)
		d.found[m].hidden = s.goodShare(lo, hi) < 0.95
	}
	return true
}

// describe returns chi^2 of the bins of the joint fit, of noise and the scatter of
// single bins, and how many there are. The fit itself counts correlated bins for
// less, which would let any model pass.
func (s *Scratch) describe(f *Finder) (chi2, bins float64) {
	j, fo := &s.joint, &s.forest
	s.evaluate(f, j.p, j.model, nil)
	for _, w := range j.windows {
		for i := w.lo; i < w.hi; i++ {
			if fo.noise[i] > 0 {
				m := j.model[w.at+i-w.lo]
				sd, r := fo.scatter*m, fo.flux[i]-m
				chi2 += r * r / (fo.noise[i] + sd*sd)
				bins++
			}
		}
	}
	return chi2, bins
}

// gather lists the systems that share a window with system k and lays out the
// windows: Lyman alpha, and the further lines of the series that lie in the
// coverage.
func (s *Scratch) gather(f *Finder, k int) {
	d, j, fo := &s.damp, &s.joint, &s.forest
	j.members = append(j.members[:0], k)
	flank := int(flankKms / fo.step)
	wide := func(c cloud, l int) (int, int) {
		lo, hi := s.lineWindow(f, c, l)
		if lo >= hi {
			return 0, 0
		}
		return max(fo.first, lo-flank), min(len(fo.flux), hi+flank)
	}
	for grown := true; grown; {
		grown = false
		for m := range d.found {
			if contains(j.members, m) {
				continue
			}
			lo, hi := wide(d.found[m], 0)
			for _, o := range j.members {
				if a, b := wide(d.found[o], 0); lo < b && a < hi {
					j.members, grown = append(j.members, m), true
					break
				}
			}
		}
	}
	j.windows = j.windows[:0]
	for _, m := range j.members {
		c := &d.found[m]
		c.lines = 0
		for l := range f.series {
			lo, hi := wide(*c, l)
			if hi-lo < 2*flank || s.goodShare(lo, hi) < 0.5 {
				break
			}
			c.lines = l + 1
			j.windows = append(j.windows, jointWindow{lo: lo, hi: hi})
		}
		c.lines = max(c.lines, 1)
	}
	// Windows that overlap become one.
	for merged := true; merged; {
		merged = false
		for i := 0; i < len(j.windows) && !merged; i++ {
			for k := i + 1; k < len(j.windows); k++ {
				a, b := &j.windows[i], &j.windows[k]
				if a.lo < b.hi && b.lo < a.hi {
					a.lo, a.hi = min(a.lo, b.lo), max(a.hi, b.hi)
					j.windows = append(j.windows[:k], j.windows[k+1:]...)
					merged = true
					break
				}
			}
		}
	}
	total := 0
	for i := range j.windows {
		j.windows[i].at = total
		total += j.windows[i].hi - j.windows[i].lo
	}
	j.model, j.shade, j.moved = resize(j.model, total), resize(j.shade, total), resize(j.moved, total)
	j.weight = resize(j.weight, total)
}

func (s *Scratch) goodShare(lo, hi int) float64 {
	good := 0
	for i := lo; i < hi; i++ {
		if s.forest.noise[i] > 0 {
			good++
		}
	}
	return float64(good) / float64(max(1, hi-lo))
}

func contains(list []int, v int) bool {
	for _, x := range list {
		if x == v {
			return true
		}
	}
	return false
}

// evaluate fills out with the model, and shade with the transmission alone
// when it is not nil.
func (s *Scratch) evaluate(f *Finder, p, out, shade []float64) {
	j, fo := &s.joint, &s.forest
	nm := 3 * len(j.members)
	for wi, w := range j.windows {
		v := out[w.at : w.at+w.hi-w.lo]
		for i := range v {
			v[i] = 1
		}
		for mi, m := range j.members {
			c := s.damp.found[m]
			c.x, c.logN, c.lnB = p[3*mi], p[3*mi+1], p[3*mi+2]
			for l := range c.lines {
				lo, hi := s.lineWindow(f, c, l)
				lo, hi = max(lo, w.lo), min(hi, w.hi)
				if lo >= hi {
					continue
				}
				s.dim(f, c, l, lo, hi)
				for i := lo; i < hi; i++ {
					v[i-w.lo] *= s.through[i-lo]
				}
			}
		}
		if shade != nil {
			copy(shade[w.at:], v)
		}
		gain, tilt := p[nm+shapes*wi], p[nm+shapes*wi+1]
		bend := p[nm+shapes*wi+2]
		half := 0.5 * float64(w.hi-w.lo)
		for i := range v {
			u := float64(i)/half - 1
			v[i] *= fo.level[w.lo+i] * (gain + tilt*u + bend*(u*u-1.0/3))
		}
	}
}

// prior returns what is known of parameter i beforehand: value and error, 0
// for nothing.
func (s *Scratch) prior(i int) (value, err float64) {
	nm := 3 * len(s.joint.members)
	switch {
	case i < nm && i%3 == 2:
		return math.Log(dopplerGuess), lnBPrior
	case i < nm:
		return 0, 0
	case (i-nm)%shapes == 0:
		return 1, gainPrior
	case (i-nm)%shapes == 1:
		return 0, tiltPrior
	}
	return 0, bendPrior
}

// solveJoint minimizes chi^2 with the method of Levenberg and Marquardt, with
// weights from the model of the last step: noise plus the scatter of the
// forest, dimmed like the light. The result is unbiased where the model is
// right, because residuals then have mean zero whatever the weights. Values and
// errors go into damp.found.
func (s *Scratch) solveJoint(f *Finder) bool {
	d, j, fo := &s.damp, &s.joint, &s.forest
	nm := 3 * len(j.members)
	n := nm + shapes*len(j.windows)
	j.p = resize(j.p, n)
	s.startX = s.startX[:0]
	for mi, m := range j.members {
		c := d.found[m]
		s.startX = append(s.startX, c.x)
		j.p[3*mi], j.p[3*mi+1], j.p[3*mi+2] = c.x, c.logN, c.lnB
	}
	for w := range j.windows {
		j.p[nm+shapes*w] = 1
	}
	total := len(j.model)
	j.deriv = resize(j.deriv, n*total)
	j.a, j.b, j.chol, j.cov = resize(j.a, n*n), resize(j.b, n), resize(j.chol, n*n), resize(j.cov, n*n)
	j.step, j.best = resize(j.step, n), resize(j.best, n)
	lambda := 1e-2
	for range 14 {
		s.evaluate(f, j.p, j.model, j.shade)
		for _, w := range j.windows {
			for i := w.lo; i < w.hi; i++ {
				k := w.at + i - w.lo
				j.weight[k] = 0
				if fo.noise[i] > 0 {
					sd := fo.scatter * j.model[k]
					j.weight[k] = 1 / (fo.noise[i] + sd*sd*fo.memory)
				}
			}
		}
		chi2 := s.chi2(j.p, j.model)
		s.linearize(f, n)
		improved := false
		for range 6 {
			if !s.proposeJoint(n, lambda) {
				lambda = max(10*lambda, 1e-3)
				continue
			}
			s.evaluate(f, j.best, j.moved, nil)
			if v := s.chi2(j.best, j.moved); v < chi2 {
				improved = chi2-v > 1e-2
				copy(j.p, j.best)
				lambda *= 0.2
				break
			}
			lambda = max(10*lambda, 1e-3)
		}
		if !improved {
			break
		}
	}
	if !s.invertJoint(n) {
		return false
	}
	for mi, m := range j.members {
		c := &d.found[m]
		i := 3 * mi
		c.bound = j.p[i+1] <= lowestLogN || j.p[i+1] >= highestLogN || math.Abs(j.p[i]-s.startX[mi]) >= mostShift
		c.x, c.logN, c.lnB = j.p[i], j.p[i+1], j.p[i+2]
		c.xErr, c.nErr, c.bErr = math.Sqrt(j.cov[i*n+i]), math.Sqrt(j.cov[(i+1)*n+i+1]), math.Sqrt(j.cov[(i+2)*n+i+2])
	}
	return true
}

// gainOf returns by how much -2 ln likelihood of the bins of the joint fit
// grows without system k.
func (s *Scratch) gainOf(f *Finder, k int) float64 {
	j := &s.joint
	nm := 3 * len(j.members)
	s.evaluate(f, j.p, j.model, j.shade)
	gain := 0.0
	for wi, w := range j.windows {
		half := 0.5 * float64(w.hi-w.lo)
		for i := w.lo; i < w.hi; i++ {
			b := i - w.lo
			u := float64(b)/half - 1
			level := s.forest.level[i] * (j.p[nm+shapes*wi] + j.p[nm+shapes*wi+1]*u + j.p[nm+shapes*wi+2]*(u*u-1.0/3))
			gain -= s.cost(i, level, j.shade[w.at+b])
		}
	}
	mi := 0
	for j.members[mi] != k {
		mi++
	}
	// Without it: no column.
	old := j.p[3*mi+1]
	j.p[3*mi+1] = 0
	s.evaluate(f, j.p, j.model, j.shade)
	j.p[3*mi+1] = old
	for _, w := range j.windows {
		s.empty = resize(s.empty, w.hi-w.lo+1)
		s.emptyCosts(s.empty, w.lo, w.hi, func(i int) float64 { return s.forest.level[i] * j.shade[w.at+i-w.lo] })
		gain += s.empty[w.hi-w.lo]
	}
	s.damp.found[k].gain = gain
	return gain
}
