package lines

import "math"

// model is a least-squares problem. normal returns chi^2 at p and fills the
// upper triangle of a, n x n row-major, with half the approximate Hessian
// J^T W J and b with J^T W (data - model).
type model interface {
	normal(p, a, b []float64) float64
}

// marquardt minimizes chi^2 by the method of Levenberg (1944) and Marquardt
// (1963, J. SIAM 11, 431), with bounds: a parameter that a step would carry
// over its bound stops there, and takes no part in steps while the gradient
// pushes it outward. The zero value is ready; buffers are kept.
type marquardt struct {
	n       int
	p       []float64 // parameters, in and out
	lo, hi  []float64 // bounds
	fixed   []bool    // parameters that are held
	held    []bool    // fixed, without effect, or pressed against a bound
	trial   []float64
	a, b    []float64
	ta, tb  []float64
	chol    []float64
	inverse []float64 // of the diagonal of chol
	scale   []float64
	step    []float64
	cov     []float64 // covariance, full n x n, zero for held ones
	narrow  []float64 // covariance of the linearized fit, where cov is wider
	chi2    float64
	gain    float64 // drop of chi^2 that the last linear step brought
	free    int     // number of parameters not held at the end
}

func (m *marquardt) reset(n int) {
	m.n = n
	for _, v := range []*[]float64{&m.p, &m.lo, &m.hi, &m.trial, &m.b, &m.tb, &m.scale, &m.step, &m.inverse} {
		*v = resize(*v, n)
	}
	for _, v := range []*[]float64{&m.a, &m.ta, &m.chol, &m.cov} {
		*v = resize(*v, n*n)
	}
	for _, v := range []*[]bool{&m.fixed, &m.held} {
		if cap(*v) < n {
			*v = make([]bool, 2*n)
		}
		*v = (*v)[:n]
		clear(*v)
	}
	for i := range n {
		m.p[i], m.lo[i], m.hi[i] = 0, math.Inf(-1), math.Inf(1)
	}
}

const (
	maxSteps = 30
	// The last step is taken without a look at where it leads when it
	// promises less than this of chi^2: it moves no parameter by more than
	// 0.03 of its error, and what it leaves is of second order in that.
	lastGain = 1e-3
	// slowGain: after two steps that gained less, along a narrow valley,
	// the search ends.
	slowGain = 0.1
	maxDamp  = 1e8
)

// linear solves for the parameters that are not fixed, in which the model must
// be linear, in one step. It reports whether the equations could be solved.
func (m *marquardt) linear(f model) bool {
	m.chi2 = f.normal(m.p, m.a, m.b)
	gain, ok := m.propose(0)
	if ok {
		m.p, m.trial = m.trial, m.p
		m.chi2 -= gain
		m.gain = gain
	}
	return ok
}

// minimize runs from p and leaves the solution in p, chi2 and cov. It reports
// whether the equations could be solved; p is finite in any case.
func (m *marquardt) minimize(f model) bool {
	m.chi2 = f.normal(m.p, m.a, m.b)
	lambda := 0.0
	solved, slow := false, 0
	for range maxSteps {
		gain, ok := m.propose(lambda)
		if !ok {
			if lambda = max(10*lambda, 1e-3); lambda > maxDamp {
				break
			}
			continue
		}
		solved = true
		if gain < lastGain && lambda < 0.1 {
			m.p, m.trial = m.trial, m.p
			m.chi2 -= gain
			break
		}
		chi2 := f.normal(m.trial, m.ta, m.tb)
		if chi2 <= m.chi2 {
			if m.chi2-chi2 < slowGain {
				slow++
			}
			m.p, m.trial = m.trial, m.p
			m.a, m.ta = m.ta, m.a
			m.b, m.tb = m.tb, m.b
			m.chi2 = chi2
			if lambda *= 0.1; lambda < 1e-4 {
				lambda = 0
			}
			if slow == 2 {
				break
			}
			continue
		}
		if lambda = max(10*lambda, 1e-3); lambda > maxDamp {
			break
		}
	}
	return m.covariance() && solved
}

// hold marks the parameters that take no part in a step.
func (m *marquardt) hold() {
	m.free = 0
	for i := range m.n {
		d := m.a[i*m.n+i]
		m.held[i] = m.fixed[i] || !(d > 0) || math.IsInf(d, 0) ||
			(m.p[i] <= m.lo[i] && m.b[i] < 0) || (m.p[i] >= m.hi[i] && m.b[i] > 0)
		if m.held[i] {
			m.scale[i] = 0
			continue
		}
		m.scale[i] = 1 / math.Sqrt(d)
		m.free++
	}
}

// factor writes the Cholesky factor of the scaled matrix plus lambda on its
// unit diagonal into chol; held rows are those of the unit matrix.
func (m *marquardt) factor(lambda float64) bool {
	n := m.n
	for i := range n {
		for j := range i {
			m.chol[i*n+j] = m.a[j*n+i] * m.scale[i] * m.scale[j]
		}
		m.chol[i*n+i] = 1 + lambda
	}
	inv := m.inverse[:n]
	for i := range n {
		ri := m.chol[i*n : i*n+n]
		for j := 0; j <= i; j++ {
			rj := m.chol[j*n : j*n+j+1]
			s := ri[j]
			left := ri[:len(rj)]
			for k, v := range rj[:j] {
				s -= left[k] * v
			}
			if i != j {
				ri[j] = s * inv[j]
				continue
			}
			if !(s > 1e-13) {
				return false
			}
			ri[i] = math.Sqrt(s)
			inv[i] = 1 / ri[i]
		}
	}
	return true
}

// solve overwrites x, in scaled units, with the solution of chol chol^T y = x.
func (m *marquardt) solve(x []float64) {
	n := m.n
	for i := range n {
		s, y := x[i], x[:i]
		for k, l := range m.chol[i*n : i*n+len(y)] {
			s -= l * y[k]
		}
		x[i] = s * m.inverse[i]
	}
	for i := n - 1; i >= 0; i-- {
		v, y := x[i]*m.inverse[i], x[:i]
		x[i] = v
		for k, l := range m.chol[i*n : i*n+len(y)] {
			y[k] -= l * v
		}
	}
}

// propose computes the trial point for a damping and the drop of chi^2 that
// the quadratic model promises for it.
func (m *marquardt) propose(lambda float64) (gain float64, ok bool) {
	m.hold()
	if !m.factor(lambda) {
		return 0, false
	}
	for i := range m.n {
		m.step[i] = m.b[i] * m.scale[i]
	}
	m.solve(m.step)
	for i := range m.n {
		d := m.step[i] * m.scale[i]
		t := min(max(m.p[i]+d, m.lo[i]), m.hi[i])
		if m.held[i] || math.IsNaN(t) {
			t = m.p[i]
		}
		m.trial[i] = t
		gain += math.Abs(t-m.p[i]) * math.Abs(m.b[i])
	}
	return gain, true
}

// covariance inverts the matrix at the solution. Parameters at a bound that
// the data would push over it are left out: their errors are unknown.
func (m *marquardt) covariance() bool {
	clear(m.cov)
	m.hold()
	ok := m.factor(0)
	if !ok && !m.factor(1e-9) {
		return false
	}
	// With the inverse L of the factor, row by row in cov, the inverse of the
	// matrix is L^T L; rows of it are summed from the top, each after its last use.
	n := m.n
	for i := range n {
		row := m.cov[i*n : i*n+i+1]
		d := m.inverse[i]
		for k := range i {
			f := m.chol[i*n+k] * d
			if f == 0 {
				continue
			}
			for j, v := range m.cov[k*n : k*n+k+1] {
				row[j] -= f * v
			}
		}
		row[i] = d
	}
	for i := range n {
		for j := 0; j <= i; j++ {
			sum := 0.0
			for k := i; k < n; k++ {
				sum += m.cov[k*n+i] * m.cov[k*n+j]
			}
			m.step[j] = sum
		}
		copy(m.cov[i*n:i*n+i+1], m.step)
	}
	for i := range n {
		for j := 0; j <= i; j++ {
			v := 0.0
			if !m.held[i] && !m.held[j] {
				v = m.cov[i*n+j] * m.scale[i] * m.scale[j]
			}
			m.cov[i*n+j], m.cov[j*n+i] = v, v
		}
	}
	return ok
}

// resize returns a zeroed slice of length n, reusing v when it is large enough.
func resize(v []float64, n int) []float64 {
	if cap(v) < n {
		v = make([]float64, n, n+n/2)
	}
	v = v[:n]
	clear(v)
	return v
}
