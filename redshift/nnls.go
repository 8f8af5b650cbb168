package redshift

import "math"

// nnls minimizes a^T G a - 2 h^T a over a >= 0 for an m x m positive
// semi-definite G (row-major, stride maxComponents) by the active-set method of
// Lawson & Hanson (1974, Solving Least Squares Problems, chapter 23) on the
// normal equations (Bro & De Jong 1997). A positive most[i] bounds a[i] from
// above as well (Stark & Parker 1995, Computational Statistics 10, 129). It
// writes the solution to a and returns the decrease 2 h^T a - a^T G a and the
// number of positive amplitudes. Components whose diagonal is not positive, and
// those that are barred, stay at zero.
func nnls(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, barred *[maxComponents]bool, m int) (drop float64, active int) {
	// An amplitude is free (in), at zero or at its bound (full).
	var in, full, dead [maxComponents]bool
	for i := 0; i < m; i++ {
		a[i], dead[i] = 0, barred[i] || !(g[i*maxComponents+i] > 0)
	}
	for iter := 0; iter < 4*m; iter++ {
		// The gradient of the variable that gains most, scaled by its norm.
		best, gain := -1, 1e-9
		for i := 0; i < m; i++ {
			if in[i] || dead[i] {
				continue
			}
			d := gradient(a, g, h, i, m)
			if full[i] {
				d = -d
			}
			if v := d / math.Sqrt(g[i*maxComponents+i]); v > gain {
				best, gain = i, v
			}
		}
		if best < 0 {
			break
		}
		was := full[best]
		in[best], full[best] = true, false
		if !settle(a, g, h, most, &in, &full, m) || !in[best] && full[best] == was {
			// Collinear with what is in already, or back at once.
			in[best], full[best], dead[best] = false, was, true
		}
	}
	for i := 0; i < m; i++ {
		if a[i] > 0 {
			active++
			drop += a[i] * (h[i] + gradient(a, g, h, i, m))
		}
	}
	return drop, active
}

// gradient is half the derivative of the decrease with respect to a[i].
func gradient(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h *[maxComponents]float64, i, m int) float64 {
	d := h[i]
	for j := 0; j < m; j++ {
		d -= g[i*maxComponents+j] * a[j]
	}
	return d
}

// settle moves the free amplitudes to their least-squares solution. When that
// lies beyond a bound it goes as far as the first bound, leaves that amplitude
// there and starts again. It reports false, with a as it was, when the free
// components are linearly dependent.
func settle(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, in, full *[maxComponents]bool, m int) bool {
	var s, rest [maxComponents]float64
	for {
		for i := 0; i < m; i++ {
			rest[i] = h[i]
			for j := 0; j < m; j++ {
				if full[j] {
					rest[i] -= g[i*maxComponents+j] * most[j]
				}
			}
		}
		if !solveSubset(&s, g, &rest, in, m) {
			return false
		}
		t, out := 1.0, -1
		for i := 0; i < m; i++ {
			if !in[i] {
				continue
			}
			bound := 0.0
			switch {
			case s[i] <= 0:
			case most[i] > 0 && s[i] > most[i]:
				bound = most[i]
			default:
				continue
			}
			q := 0.0 // at the bound already
			if a[i] != s[i] {
				q = (bound - a[i]) / (s[i] - a[i])
			}
			if q < t || out < 0 {
				t, out = q, i
			}
		}
		if out < 0 {
			for i := 0; i < m; i++ {
				if in[i] {
					a[i] = s[i]
				}
			}
			return true
		}
		for i := 0; i < m; i++ {
			if in[i] {
				a[i] += t * (s[i] - a[i])
			}
		}
		in[out] = false
		a[out] = 0
		if s[out] > 0 {
			a[out], full[out] = most[out], true
		}
	}
}

// solveSubset solves G s = h over the variables that are in, by Cholesky. It
// reports false when they are linearly dependent to 1e-10.
func solveSubset(s *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h *[maxComponents]float64, in *[maxComponents]bool, m int) bool {
	var idx [maxComponents]int
	k := 0
	for i := 0; i < m; i++ {
		if in[i] {
			idx[k] = i
			k++
		}
	}
	var l [maxComponents][maxComponents]float64
	var y [maxComponents]float64
	for i := 0; i < k; i++ {
		for j := 0; j <= i; j++ {
			v := g[idx[i]*maxComponents+idx[j]]
			for q := 0; q < j; q++ {
				v -= l[i][q] * l[j][q]
			}
			if i == j {
				if v <= 1e-10*g[idx[i]*maxComponents+idx[i]] {
					return false
				}
				l[i][i] = math.Sqrt(v)
			} else {
				l[i][j] = v / l[j][j]
			}
		}
		v := h[idx[i]]
		for q := 0; q < i; q++ {
			v -= l[i][q] * y[q]
		}
		y[i] = v / l[i][i]
	}
	for i := k - 1; i >= 0; i-- {
		v := y[i]
		for q := i + 1; q < k; q++ {
			v -= l[q][i] * s[idx[q]]
		}
		s[idx[i]] = v / l[i][i]
	}
	return true
}
