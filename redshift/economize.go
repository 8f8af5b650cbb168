package redshift

import "math"

// economize is nnls with a price on every component that is used: as long as
// leaving one out costs less than the price, the cheapest is left out and the rest
// solved again. So the score, price times components less the decrease of chi^2, is
// that of the model that deserves to be compared, not of one that carries amplitudes
// no better than noise (backward elimination by the criterion of Schwarz 1978). It is
// never above that of nnls.
func economize(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, barred *[maxComponents]bool, m int, price float64) (drop float64, active int) {
	drop, active = nnls(a, g, h, most, barred, m)
	out := *barred
	trial, left, used := *a, drop, active
	for used > 0 {
		worst, cost := cheapest(&trial, g, h, most, m)
		if worst < 0 || cost >= price {
			break
		}
		out[worst] = true
		left, used = nnls(&trial, g, h, most, &out, m)
		// Others that meet a bound on the way make it dearer than it seemed; the
		// next step may yet pay for it.
		if price*float64(used)-left < price*float64(active)-drop {
			*a, drop, active = trial, left, used
		}
	}
	return drop, active
}

// cheapest returns the used component without which chi^2 rises least, the free
// ones adapting, and by how much: with gradient d, which is zero unless a is at its
// bound, 2 a d + a^2/(G^-1)_ii, G being that of this one and the free ones. It returns
// -1 when they are linearly dependent.
func cheapest(a *[maxComponents]float64, g *[maxComponents * maxComponents]float64, h, most *[maxComponents]float64, m int) (int, float64) {
	var free [maxComponents]bool
	for i := range m {
		free[i] = a[i] > 0 && !(most[i] > 0 && a[i] >= most[i])
	}
	worst, cost := -1, math.Inf(1)
	for i := range m {
		if a[i] <= 0 {
			continue
		}
		c := 0.0
		with := free
		if !free[i] {
			with[i] = true
			c = 2 * a[i] * math.Max(0, gradient(a, g, h, i, m))
		}
		var unit, column [maxComponents]float64
		unit[i] = 1
		if !solveSubset(&column, g, &unit, &with, m) {
			return -1, 0
		}
		if c += a[i] * a[i] / column[i]; c < cost {
			worst, cost = i, c
		}
	}
	return worst, cost
}
