package absorbers

import "math"

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
