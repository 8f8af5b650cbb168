package absorbers

import (
	"math"

	"duskline/spectrum"
)

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
	columnFloor = 0.02
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
	chi2, ok := s.solveJoint(f)
	c := &d.found[k]
	ok = ok && c.logN >= keepLogN && c.nErr < 1 && s.gainOf(f, k) > keepGain
	if !ok {
		copy(d.found, before)
		return false
	}
	dof := 0.0
	for _, w := range j.windows {
		for i := w.lo; i < w.hi; i++ {
			if s.forest.noise[i] > 0 {
				dof++
			}
		}
	}
	for _, m := range j.members {
		d.found[m].chi2, d.found[m].dof = chi2, max(1, dof-float64(3*len(j.members)))
		d.found[m].lap = len(j.members) > 1
	}
	return true
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
func (s *Scratch) solveJoint(f *Finder) (chi2 float64, ok bool) {
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
	chi2 = math.Inf(1)
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
		chi2 = s.chi2(j.p, j.model)
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
		return chi2, false
	}
	for mi, m := range j.members {
		c := &d.found[m]
		i := 3 * mi
		c.bound = j.p[i+1] <= lowestLogN || j.p[i+1] >= highestLogN || math.Abs(j.p[i]-s.startX[mi]) >= mostShift
		c.x, c.logN, c.lnB = j.p[i], j.p[i+1], j.p[i+2]
		c.xErr, c.nErr, c.bErr = math.Sqrt(j.cov[i*n+i]), math.Sqrt(j.cov[(i+1)*n+i+1]), math.Sqrt(j.cov[(i+2)*n+i+2])
	}
	return chi2, true
}

// chi2 is that of a model with the present weights, priors included.
func (s *Scratch) chi2(p, model []float64) float64 {
	j, fo := &s.joint, &s.forest
	sum := 0.0
	for _, w := range j.windows {
		for i := w.lo; i < w.hi; i++ {
			k := w.at + i - w.lo
			r := fo.flux[i] - model[k]
			sum += r * r * j.weight[k]
		}
	}
	for i := range p {
		if v, e := s.prior(i); e > 0 {
			sum += (p[i] - v) * (p[i] - v) / (e * e)
		}
	}
	return sum
}

// linearize fills the normal equations at p, with derivatives by differences.
func (s *Scratch) linearize(f *Finder, n int) {
	j, fo := &s.joint, &s.forest
	total := len(j.model)
	nm := 3 * len(j.members)
	for i := range n {
		h := 0.02
		if i < nm && i%3 == 0 {
			h = 20 // km/s
		}
		row := j.deriv[i*total : (i+1)*total]
		if i >= nm {
			clear(row)
			w := j.windows[(i-nm)/shapes]
			half := 0.5 * float64(w.hi-w.lo)
			for b := range w.hi - w.lo {
				row[w.at+b] = fo.level[w.lo+b] * j.shade[w.at+b]
				switch u := float64(b)/half - 1; (i - nm) % shapes {
				case 1:
					row[w.at+b] *= u
				case 2:
					row[w.at+b] *= u*u - 1.0/3
				}
			}
			continue
		}
		old := j.p[i]
		j.p[i] = old + h
		s.evaluate(f, j.p, row, nil)
		j.p[i] = old
		for b := range row {
			row[b] = (row[b] - j.model[b]) / h
		}
	}
	clear(j.a)
	clear(j.b)
	for i := range n {
		ri := j.deriv[i*total : (i+1)*total]
		for k := i; k < n; k++ {
			rk := j.deriv[k*total : (k+1)*total]
			sum := 0.0
			for b, w := range j.weight {
				sum += ri[b] * rk[b] * w
			}
			j.a[i*n+k], j.a[k*n+i] = sum, sum
		}
		for _, w := range j.windows {
			for b := w.lo; b < w.hi; b++ {
				k := w.at + b - w.lo
				j.b[i] += ri[k] * j.weight[k] * (fo.flux[b] - j.model[k])
			}
		}
		if v, e := s.prior(i); e > 0 {
			j.a[i*n+i] += 1 / (e * e)
			j.b[i] -= (j.p[i] - v) / (e * e)
		}
	}
}

// factor writes the Cholesky factor of a with its diagonal raised.
func (j *joint) factor(n int, lambda float64) bool {
	for r := range n {
		for c := 0; c <= r; c++ {
			v := j.a[r*n+c]
			if r == c {
				v *= 1 + lambda
			}
			for k := range c {
				v -= j.chol[r*n+k] * j.chol[c*n+k]
			}
			if r != c {
				j.chol[r*n+c] = v / j.chol[c*n+c]
				continue
			}
			if !(v > 1e-12*j.a[r*n+r]) {
				return false
			}
			j.chol[r*n+r] = math.Sqrt(v)
		}
	}
	return true
}

func (j *joint) back(n int, x []float64) {
	for r := range n {
		for k := range r {
			x[r] -= j.chol[r*n+k] * x[k]
		}
		x[r] /= j.chol[r*n+r]
	}
	for r := n - 1; r >= 0; r-- {
		for k := r + 1; k < n; k++ {
			x[r] -= j.chol[k*n+r] * x[k]
		}
		x[r] /= j.chol[r*n+r]
	}
}

// proposeJoint puts the damped step into best, within bounds.
func (s *Scratch) proposeJoint(n int, lambda float64) bool {
	j := &s.joint
	if !j.factor(n, lambda) {
		return false
	}
	copy(j.step, j.b)
	j.back(n, j.step)
	nm := 3 * len(j.members)
	for i := range n {
		v := j.p[i] + j.step[i]
		switch {
		case math.IsNaN(v):
			return false
		case i >= nm:
		case i%3 == 0:
			v = min(max(v, s.startX[i/3]-mostShift), s.startX[i/3]+mostShift)
		case i%3 == 1:
			v = min(max(v, lowestLogN), highestLogN)
		default:
			v = min(max(v, math.Log(5)), math.Log(150))
		}
		j.best[i] = v
	}
	return true
}

func (s *Scratch) invertJoint(n int) bool {
	j := &s.joint
	if !j.factor(n, 0) {
		return false
	}
	for c := range n {
		clear(j.step)
		j.step[c] = 1
		j.back(n, j.step)
		for r := range n {
			j.cov[r*n+c] = j.step[r]
		}
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
	sum := func(sign float64) {
		for wi, w := range j.windows {
			half := 0.5 * float64(w.hi-w.lo)
			for i := w.lo; i < w.hi; i++ {
				b := i - w.lo
				level := s.forest.level[i]
				if sign > 0 {
					u := float64(b)/half - 1
					level *= j.p[nm+shapes*wi] + j.p[nm+shapes*wi+1]*u + j.p[nm+shapes*wi+2]*(u*u-1.0/3)
				}
				gain -= sign * s.cost(i, level, j.shade[w.at+b])
			}
		}
	}
	sum(1)
	mi := 0
	for j.members[mi] != k {
		mi++
	}
	// Without it: no column.
	old := j.p[3*mi+1]
	j.p[3*mi+1] = 0
	s.evaluate(f, j.p, j.model, j.shade)
	j.p[3*mi+1] = old
	sum(-1)
	s.damp.found[k].gain = gain
	return gain
}

// reportHydrogen appends the systems found, by redshift.
func (s *Scratch) reportHydrogen(dst []System, f *Finder, opt Options) []System {
	d := &s.damp
	for i := 1; i < len(d.found); i++ {
		for k := i; k > 0 && d.found[k].x < d.found[k-1].x; k-- {
			d.found[k], d.found[k-1] = d.found[k-1], d.found[k]
		}
	}
	for _, c := range d.found {
		sys := blank(Hydrogen)
		sys.Z = math.Expm1(c.x / spectrum.SpeedOfLight)
		sys.ZErr = (1 + sys.Z) * c.xErr / spectrum.SpeedOfLight
		sys.LogN, sys.LogErr = c.logN, math.Hypot(c.nErr, columnFloor)
		if c.bErr < 0.5*lnBPrior {
			sys.B = math.Exp(c.lnB)
			sys.BErr = sys.B * c.bErr
		}
		sys.EW = f.series[0].EquivalentWidth(math.Pow(10, c.logN), math.Exp(c.lnB))
		sys.EWErr = 0.5 * math.Ln10 * sys.LogErr * sys.EW
		sys.Significance = math.Sqrt(max(0, c.gain))
		for l := range c.lines {
			if l > 0 {
				sys.Lines += "+"
			}
			sys.Lines += f.names[l]
		}
		for _, t := range []struct {
			set  bool
			flag Flags
		}{
			{c.nErr > 0.3, FlatPart}, {c.chi2 > poorFrom*c.dof, PoorFit}, {c.bound, AtBound}, {c.lines == 1, OneLine}, {c.lap, Overlaps},
			{spectrum.SpeedOfLight*math.Log1p(opt.Z)-c.x < proximateKms, Proximate}, {c.hidden, PartlyHidden},
		} {
			if t.set {
				sys.Flags |= t.flag
			}
		}
		dst = append(dst, sys)
	}
	return dst
}
