package continuum

import "math"

// fullFrom is the share of the points of an interval that must count for the data
// to rule there alone.
const fullFrom = 0.8

// interval is what a fit knows of the points between two knots.
type interval struct {
	all, used  float64 // points, and those that count
	flux, ivar float64 // means of those that count
}

// empty says how little of an interval counts, from 0 to 1.
func (v *interval) empty() float64 {
	if v.all == 0 {
		return 1
	}
	return max(0, 1-v.used/v.all/fullFrom)
}

// survey fills the intervals.
func (f *Fitter) survey(flux, ivar []float64, lo, hi int) {
	f.intervals = grow(f.intervals, f.basis.Intervals)
	clear(f.intervals)
	for i := lo; i <= hi; i++ {
		v := &f.intervals[f.first[i]]
		v.all++
		if w := ivar[i]; w > 0 && !f.out[i] {
			v.used++
			v.flux += flux[i]
			v.ivar += w
		}
	}
	for j := range f.intervals {
		if v := &f.intervals[j]; v.used > 0 {
			v.flux /= v.used
			v.ivar /= v.used
		}
	}
}

// unbend adds to the equations a Gaussian prior on the bends of the spline where
// intervals are empty. The second difference of the coefficients i to i+2 is the
// spline's second derivative at knot i times the squared spacing; its prior has mean
// zero and the standard deviation opt.Bend of the flux on both sides, and the error of
// that in quadrature, and counts by the square of the mean emptiness beside
// the knot. So the spline crosses a gap, and ends beside one, as straight as
// the data allow, and is free where there are data.
func (f *Fitter) unbend(bend float64) {
	n := len(f.intervals)
	for i := 0; i <= n; i++ {
		empty := 0.5 * (f.intervals[max(0, i-1)].empty() + f.intervals[min(i, n-1)].empty())
		if empty == 0 {
			continue
		}
		var level, noise, sides float64
		for _, j := range [2]int{f.filled(i-1, -1), f.filled(i, 1)} {
			if j >= 0 {
				level += math.Abs(f.intervals[j].flux)
				noise += 1 / (f.intervals[j].ivar * f.intervals[j].used)
				sides++
			}
		}
		variance := bend*bend*level*level/(sides*sides) + noise/sides
		f.normal.difference(i, empty*empty*f.scatter*f.scatter/variance, second)
	}
}

// filled returns the nearest interval with points that count, from j on; -1 for none.
func (f *Fitter) filled(j, step int) int {
	for ; j >= 0 && j < len(f.intervals); j += step {
		if f.intervals[j].used > 0 {
			return j
		}
	}
	return -1
}

// Between returns how many points that counted in the last round lie in [from, to]: where few
// do on one side of a place, the spline there is an extrapolation, or spans a gap.
func (f *Fitter) Between(from, to float64) int {
	return f.rank(math.Nextafter(to, math.Inf(1))) - f.rank(from)
}

// rank counts the points of the last fit below v.
func (f *Fitter) rank(v float64) int {
	lo, hi := 0, len(f.held)
	for lo < hi {
		if mid := (lo + hi) / 2; f.held[mid] < v {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo
}
