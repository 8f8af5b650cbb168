package redshift

import "math"

// temper brings the weights to what the data show, for all families alike.
//
// Where no peak describes the data, each weight is divided by the excess: the
// mean of w r^2 over its neighborhood, from whichever peak fits best there,
// over what it is elsewhere. The forest, broad absorption or a bad stretch then
// no longer decides between families by chance agreements, and the gap is in
// units of what the best models leave.
//
// All weights are scaled up where the stated errors are too large: by the mean
// of w r^2 that the best peak leaves over what noise would give, 1 for
// independent pixels and less where pixels are narrower than the input's.
//
// It reports false, with the weights as they were at first, when too little
// weight would be left to fit anything.
func (f *Finder) temper(s *Scratch) bool {
	l := &s.full
	s.tmp, s.excess = grow(s.tmp, l.n), grow(s.excess, l.n)
	for i := range s.excess {
		s.excess[i] = math.Inf(1)
	}
	least := math.Inf(1)
	for i := range s.peaks {
		p := &s.peaks[i]
		fit := s.bench.evaluate(l, p.family, p.width, p.shift)
		s.bench.residual(s.tmp, l, &fit)
		least = math.Min(least, s.localExcess(f.opt.Temper))
	}
	expect := s.independent
	scale := math.Max(leastScale, math.Min(1, least/(expect*float64(l.good))))
	for k, e := range s.excess {
		l.weight[k] = s.weight[k] / (scale * math.Max(1, e/(scale*expect)))
		l.resid[k] = s.scaled[k]
	}
	if l.prepare(s.basis, f.opt.Stiffness, ridge) {
		return true
	}
	copy(l.weight, s.weight)
	copy(l.resid, s.scaled)
	l.prepare(s.basis, f.opt.Stiffness, ridge) // as it was
	return false
}

// leastScale bounds by how much stated variances may be scaled down.
const leastScale = 0.2

// localExcess lowers s.excess to the running mean of w r^2 over half pixels to
// either side, r being s.tmp, and returns the sum of w r^2.
func (s *Scratch) localExcess(half int) float64 {
	l := &s.full
	sum, count, chi2 := 0.0, 0, 0.0
	add := func(k, sign int) {
		if k >= 0 && k < l.n && l.weight[k] > 0 {
			sum += float64(sign) * l.weight[k] * s.tmp[k] * s.tmp[k]
			count += sign
		}
	}
	for k := 0; k < half; k++ {
		add(k, 1)
	}
	for k := range s.excess {
		add(k+half, 1)
		add(k-half-1, -1)
		if count > 0 {
			s.excess[k] = math.Min(s.excess[k], sum/float64(count))
		}
		chi2 += l.weight[k] * s.tmp[k] * s.tmp[k]
	}
	return chi2
}

// correlation returns 1 + 2 sum_k rho_k of the normalized residuals u, with
// rho_k the correlation coefficient at a distance of k pixels: by so much the
// variance of a sum exceeds that of independent pixels. It goes over pixels
// with weight and over distances up to the first whose rho does not stand out
// by three standard deviations, at most correlationReach. It is never below 1.
func correlation(u, weight []float64) float64 {
	total := 1.0
	for k := 1; k <= correlationReach; k++ {
		cross, square, n := 0.0, 0.0, 0
		for i := k; i < len(u); i++ {
			if weight[i] > 0 && weight[i-k] > 0 {
				a, b := bounded(u[i]), bounded(u[i-k])
				cross += a * b
				square += 0.5 * (a*a + b*b)
				n++
			}
		}
		if square <= 0 {
			break
		}
		rho := cross / square
		if rho < 3/math.Sqrt(float64(n)) {
			break
		}
		total += 2 * rho
	}
	return total
}

const correlationReach = 8

// bounded keeps single outliers from ruling a correlation.
func bounded(u float64) float64 { return math.Max(-4, math.Min(4, u)) }
