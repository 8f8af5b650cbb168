package redshift

import "math"

// economize is nnls with a price on every component that is used: as long as
// leaving one out costs less than the price, the cheapest is left out and the rest
// solved again. So the score, price times components less the decrease of chi^2, is
// that of the model that deserves to be compared, not of one that carries amplitudes
// no better than noise (backward elimination by the criterion of Schwarz 1978).
func economize(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, barred *[maxComponents]bool, m int, price float64) (drop float64, active int) {
	drop, active = nnls(a, g, h, most, barred, m)
	out := *barred
	for active > 0 {
		worst, cost := cheapest(a, g, most, m)
		if worst < 0 || cost >= price {
			return drop, active
		}
		out[worst] = true
		drop, active = nnls(a, g, h, most, &out, m)
	}
	return drop, active
}

// cheapest returns the used component without which chi^2 rises least, the others
// adapting, and by how much: a^2 over its variance. One at its bound counts like
// one by itself. It returns -1 when the used components are linearly dependent.
func cheapest(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, most *[maxComponents]float64, m int) (int, float64) {
	var free [maxComponents]bool
	for i := range m {
		free[i] = a[i] > 0 && !(most[i] > 0 && a[i] >= most[i])
	}
	worst, cost := -1, math.Inf(1)
	for i := range m {
		if a[i] <= 0 {
			continue
		}
		norm := g[i*maxComponents+i]
		if free[i] {
			var unit, column [maxComponents]float64
			unit[i] = 1
			if !solveSubset(&column, g, &unit, &free, m) {
				return -1, 0
			}
			norm = 1 / column[i]
		}
		if c := a[i] * a[i] * norm; c < cost {
			worst, cost = i, c
		}
	}
	return worst, cost
}
