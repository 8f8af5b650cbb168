package continuum

import (
	"errors"
	"math"

	"duskline/spectrum"
)

// ErrTooFew is returned when fewer points carry weight than the spline needs.
var ErrTooFew = errors.New("too few points with weight for a continuum")

// Options steers a fit.
type Options struct {
	// Spacing is the distance of the knots in the unit of x (dex of
	// wavelength in the pipeline).
	Spacing float64
	// ClipLow and ClipHigh are the distances below and above the spline, in
	// robust standard deviations of the normalized residuals, beyond which a
	// point is left out of the next iteration. Unequal values fit an upper or
	// lower envelope; zero or less never clips on that side.
	ClipLow, ClipHigh float64
	// Iterations is the largest number of fits; the loop ends early when the
	// set of clipped points no longer changes.
	Iterations int
	// Bend is the standard deviation of the prior on the spline's bends in gaps, in
	// units of the flux: of the change of its slope over one knot, times the
	// spacing. 0 leaves gaps to the ridge. See unbend.
	Bend float64
	// Grow also leaves out that many neighbors on each side of a clipped point.
	Grow int
}

// Fitter fits continua and keeps its buffers between calls. It is not safe for
// concurrent use.
type Fitter struct {
	basis   Basis
	coef    []float64
	normal  Normal
	first   []int
	values  [][4]float64
	out     []bool
	next    []bool
	resid   []float64
	inverse []float64

	intervals []interval
	held      []float64 // x of the points that count in the last round

	scatter float64
	clipped int
	rounds  int
}

// ridge carries the spline over gaps; at 1e-9 of the mean diagonal it moves a
// well-determined spline by less than 1e-7 of its range, in the two intervals
// at each end, where little holds the outermost functions, by less than 1e-6.
const ridge = 1e-9

// Fit fits the spline to the points (x, flux) with inverse variances ivar.
// Points with ivar = 0 do not count. x must increase. It returns ErrTooFew
// when fewer than twice as many points carry weight as the spline has
// coefficients on one interval (8).
//
// Each round solves the weighted least-squares problem, estimates the scatter
// of the normalized residuals sqrt(w)(f - c) as 1.4826 times their median
// absolute value, at least 1, and clips.
func (f *Fitter) Fit(x, flux, ivar []float64, opt Options) error {
	n := len(x)
	lo, hi, good := -1, -1, 0
	for i, w := range ivar {
		if w > 0 {
			if lo < 0 {
				lo = i
			}
			hi = i
			good++
		}
	}
	if good < 8 {
		return ErrTooFew
	}
	f.basis = NewBasis(x[lo], x[hi], opt.Spacing)
	k := f.basis.Size()
	f.coef = grow(f.coef, k)
	f.first, f.values = grow(f.first, n), grow(f.values, n)
	f.out, f.next = grow(f.out, n), grow(f.next, n)
	for i := lo; i <= hi; i++ {
		f.first[i], f.values[i] = f.basis.Eval(x[i])
	}
	clear(f.out)
	f.clipped, f.scatter = 0, 1
	for f.rounds = 1; ; f.rounds++ {
		f.normal.Reset(k)
		clear(f.coef)
		for i := lo; i <= hi; i++ {
			w := ivar[i]
			if w <= 0 || f.out[i] {
				continue
			}
			j, v := f.first[i], &f.values[i]
			f.normal.Add(j, v, w)
			wf := w * flux[i]
			for a := 0; a < 4; a++ {
				f.coef[j+a] += wf * v[a]
			}
		}
		f.normal.Ridge(ridge)
		if opt.Bend > 0 {
			f.survey(flux, ivar, lo, hi)
			f.unbend(opt.Bend)
		}
		if !f.normal.Factor() {
			return ErrTooFew
		}
		f.normal.Solve(f.coef)
		f.resid, f.held = f.resid[:0], f.held[:0]
		for i := lo; i <= hi; i++ {
			if ivar[i] > 0 && !f.out[i] {
				f.held = append(f.held, x[i])
				f.resid = append(f.resid, math.Abs(math.Sqrt(ivar[i])*(flux[i]-f.at(i))))
			}
		}
		f.scatter = math.Max(1, 1.4826*spectrum.Median(f.resid))
		if f.rounds >= opt.Iterations || !f.clip(flux, ivar, lo, hi, good, opt) {
			return nil
		}
	}
}

// clip marks the points to leave out and reports whether the set changed. It
// never leaves out more than half of the points.
func (f *Fitter) clip(flux, ivar []float64, lo, hi, good int, opt Options) bool {
	clear(f.next)
	for i := lo; i <= hi; i++ {
		if ivar[i] <= 0 {
			continue
		}
		d := math.Sqrt(ivar[i]) * (flux[i] - f.at(i)) / f.scatter
		if (opt.ClipLow > 0 && d < -opt.ClipLow) || (opt.ClipHigh > 0 && d > opt.ClipHigh) {
			for j := max(lo, i-opt.Grow); j <= min(hi, i+opt.Grow); j++ {
				f.next[j] = true
			}
		}
	}
	count, changed := 0, false
	for i := lo; i <= hi; i++ {
		changed = changed || f.next[i] != f.out[i]
		if f.next[i] && ivar[i] > 0 {
			count++
		}
	}
	if !changed || 2*count > good {
		return false
	}
	f.out, f.next = f.next, f.out
	f.clipped = count
	return true
}

func (f *Fitter) at(i int) float64 {
	j, v := f.first[i], &f.values[i]
	return v[0]*f.coef[j] + v[1]*f.coef[j+1] + v[2]*f.coef[j+2] + v[3]*f.coef[j+3]
}

// Basis returns the basis of the last fit.
func (f *Fitter) Basis() Basis { return f.basis }

// Value returns the fitted continuum at x; beyond the fitted range the end
// value is held.
func (f *Fitter) Value(x float64) float64 {
	return f.basis.Value(f.coef, math.Max(f.basis.Low, math.Min(f.basis.High, x)))
}

// Scatter returns the robust standard deviation of the normalized residuals of
// the last fit, at least 1: above 1 the stated errors are too small or the
// spline misses structure.
func (f *Fitter) Scatter() float64 { return f.scatter }

// Clipped returns how many points with weight the last fit left out.
func (f *Fitter) Clipped() int { return f.clipped }

// Errors prepares Sigma: the covariance of the coefficients, A^-1 scaled by
// the squared scatter.
func (f *Fitter) Errors() {
	k := f.basis.Size()
	f.inverse = grow(f.inverse, k*k)
	clear(f.inverse)
	for i := 0; i < k; i++ {
		f.inverse[i*k+i] = f.scatter * f.scatter
	}
	f.normal.SolveMany(f.inverse, k)
}

// Sigma returns the standard error of the continuum at x from the noise alone,
// after a call of Errors. In a gap it has what Options.Bend leaves open; without that, in a
// gap of more than three knots, which only the ridge carries the spline over, it is far
// larger than the spline's error: nothing is known there.
func (f *Fitter) Sigma(x float64) float64 {
	k := f.basis.Size()
	i, v := f.basis.Eval(math.Max(f.basis.Low, math.Min(f.basis.High, x)))
	sum := 0.0
	for a := 0; a < 4; a++ {
		for b := 0; b < 4; b++ {
			sum += v[a] * v[b] * f.inverse[(i+a)*k+i+b]
		}
	}
	return math.Sqrt(math.Max(0, sum))
}

func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}
