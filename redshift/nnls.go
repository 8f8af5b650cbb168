package redshift

import "math"

// nnls minimizes a^T G a - 2 h^T a over a >= 0 for an m x m positive
// semi-definite G (row-major, stride maxComponents) by the active-set method of
// Lawson & Hanson (1974, Solving Least Squares Problems, chapter 23) on the
// normal equations (Bro & De Jong 1997). It writes the solution to a and
// returns the decrease 2 h^T a - a^T G a and the number of positive amplitudes.
// Components whose diagonal is not positive stay at zero.
//
// A positive most[i] bounds a[i] from above: amplitudes beyond their bound are
// fixed there and the others solved again.
func nnls(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, m int) (drop float64, active int) {
	var fixed [maxComponents]bool
	rest := *h
	for {
		solveFree(a, g, &rest, &fixed, m)
		again := false
		for i := 0; i < m; i++ {
			if most[i] > 0 && !fixed[i] && a[i] > most[i] {
				fixed[i], again = true, true
				a[i] = most[i]
				for j := 0; j < m; j++ {
					rest[j] -= g[j*maxComponents+i] * most[i]
				}
			}
		}
		if !again {
			break
		}
	}
	for i := 0; i < m; i++ {
		if a[i] > 0 {
			active++
			ga := 0.0
			for j := 0; j < m; j++ {
				ga += g[i*maxComponents+j] * a[j]
			}
			drop += a[i] * (2*h[i] - ga)
		}
	}
	return drop, active
}

// solveFree is the active-set iteration over the amplitudes that are not
// fixed.
func solveFree(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h *[maxComponents]float64, fixed *[maxComponents]bool, m int) {
	var in, dead [maxComponents]bool
	for i := 0; i < m; i++ {
		dead[i] = fixed[i] || !(g[i*maxComponents+i] > 0)
		if !fixed[i] {
			a[i] = 0
		}
	}
	var s [maxComponents]float64
	for iter := 0; iter < 4*m; iter++ {
		// The gradient of the variable that gains most, scaled by its norm.
		best, gain := -1, 1e-9
		for i := 0; i < m; i++ {
			if in[i] || dead[i] {
				continue
			}
			d := h[i]
			for j := 0; j < m; j++ {
				if in[j] {
					d -= g[i*maxComponents+j] * a[j]
				}
			}
			if v := d / math.Sqrt(g[i*maxComponents+i]); v > gain {
				best, gain = i, v
			}
		}
		if best < 0 {
			break
		}
		in[best] = true
		for {
			if !solveSubset(&s, g, h, &in, m) {
				// Collinear with what is in already.
				in[best], dead[best] = false, true
				break
			}
			t, out := 1.0, -1
			for i := 0; i < m; i++ {
				if in[i] && s[i] <= 0 {
					if q := a[i] / (a[i] - s[i]); q < t || out < 0 {
						t, out = q, i
					}
				}
			}
			if out < 0 {
				for i := 0; i < m; i++ {
					if in[i] {
						a[i] = s[i]
					}
				}
				break
			}
			for i := 0; i < m; i++ {
				if in[i] {
					a[i] += t * (s[i] - a[i])
				}
			}
			a[out], in[out] = 0, false
			if out == best && t == 0 {
				dead[best] = true
			}
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
