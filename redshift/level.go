package redshift

import (
	"math"

	"duskline/continuum"
	"duskline/spectrum"
)

// level is a spectrum prepared for template fits at one binning: the residual
// of the best spline and what is needed to project the spline out of a
// template.
type level struct {
	n           int
	start, step float64   // log10 wavelength of pixel 0, dex a pixel
	weight      []float64 // inverse variance with the template floor, 0 for no data
	resid       []float64 // flux minus the best spline
	cont        []float64 // clipped continuum, what absorption multiplies
	first       []int32   // index of the first basis function on each pixel
	value       [][4]float64
	normal      continuum.Normal
	size        int // coefficients of the spline
	good        int // pixels with weight
	chi2        float64
	price       float64 // of a component: ln of the independent pixels (Schwarz 1978)
	coef        []float64
}

// prepare completes a level whose resid still holds the flux: it fits the
// spline, leaves the residual, and keeps the factored equations. The spline has
// fine knots with a prior that limits waves shorter than about eight of them
// to the fraction stiffness of the continuum (see Normal.Stiffen): at low
// signal-to-noise it is as stiff as a spline of four times the spacing, at
// high it takes up faults of the flux calibration, which would otherwise count
// as evidence for whatever is broad.
func (l *level) prepare(basis continuum.Basis, stiffness, ridge float64) bool {
	l.size = basis.Size()
	l.first, l.value = grow(l.first, l.n), grow(l.value, l.n)
	l.coef = grow(l.coef, l.size)
	clear(l.coef)
	l.normal.Reset(l.size)
	l.good = 0
	for i := 0; i < l.n; i++ {
		j, v := basis.Eval(l.start + float64(i)*l.step)
		l.first[i], l.value[i] = int32(j), v
		w := l.weight[i]
		if w <= 0 {
			continue
		}
		l.good++
		l.normal.Add(j, &v, w)
		wf := w * l.resid[i]
		for a := 0; a < 4; a++ {
			l.coef[j+a] += wf * v[a]
		}
	}
	l.normal.Ridge(ridge)
	if stiffness > 0 {
		dx := (basis.High - basis.Low) / float64(basis.Intervals)
		l.normal.Stiffen(func(i int) float64 {
			// The middle of five coefficients belongs to knot i+1.
			k := int(math.Round((basis.Low + float64(i+1)*dx - l.start) / l.step))
			c := stiffness * l.cont[max(0, min(l.n-1, k))]
			return 1 / (c * c)
		})
	}
	if !l.normal.Factor() {
		return false
	}
	l.normal.Solve(l.coef)
	l.chi2 = 0
	for i := 0; i < l.n; i++ {
		j, v := l.first[i], &l.value[i]
		l.resid[i] -= v[0]*l.coef[j] + v[1]*l.coef[j+1] + v[2]*l.coef[j+2] + v[3]*l.coef[j+3]
		l.chi2 += l.weight[i] * l.resid[i] * l.resid[i]
	}
	return true
}

// pixel returns the pixel of a log10 wavelength, the nearest one outside.
func (l *level) pixel(logWave float64) int {
	return max(0, min(l.n-1, int(math.Round((logWave-l.start)/l.step))))
}

// covers reports whether a log10 wavelength lies on the level.
func (l *level) covers(logWave float64) bool {
	x := math.Round((logWave - l.start) / l.step)
	return x >= 0 && x < float64(l.n)
}

// bin fills l from a finer level by summing factor pixels at a time, before
// the finer one is prepared (its resid is still the flux).
func (l *level) bin(fine *level, factor int) {
	l.n = (fine.n + factor - 1) / factor
	l.step = fine.step * float64(factor)
	l.start = fine.start + 0.5*float64(factor-1)*fine.step
	l.weight, l.resid, l.cont = grow(l.weight, l.n), grow(l.resid, l.n), grow(l.cont, l.n)
	for i := range l.weight {
		var w, wf, c float64
		lo, hi := i*factor, min((i+1)*factor, fine.n)
		for k := lo; k < hi; k++ {
			w += fine.weight[k]
			wf += fine.weight[k] * fine.resid[k]
			c += fine.cont[k]
		}
		l.weight[i], l.resid[i], l.cont[i] = w, 0, c/float64(hi-lo)
		if w > 0 {
			l.resid[i] = wf / w
		}
	}
}

// weightFloor adds floor[i] times the local flux to the errors in quadrature:
// templates are not perfect, and without it the brightest spectra are ruled by
// the smallest faults. The local flux is a running mean over 2*half+1 pixels.
func weightFloor(dst []float64, flux, ivar, floor []float64, half int) {
	n := len(flux)
	var sum float64
	count := 0
	add := func(i, sign int) {
		if i >= 0 && i < n && ivar[i] > 0 {
			sum += float64(sign) * flux[i]
			count += sign
		}
	}
	for i := 0; i < half; i++ {
		add(i, 1)
	}
	for i := 0; i < n; i++ {
		add(i+half, 1)
		add(i-half-1, -1)
		dst[i] = 0
		if ivar[i] > 0 && count > 0 {
			e := floor[i] * sum / float64(count)
			dst[i] = 1 / (1/ivar[i] + e*e)
		}
	}
}

// fillBands sets the values of pixels inside observed-frame bands.
func fillBands(values []float64, g *spectrum.Grid, bands [][2]float64, v float64) {
	for _, b := range bands {
		lo := int(math.Ceil((math.Log10(b[0]) - g.Start) / g.Step))
		hi := int(math.Floor((math.Log10(b[1]) - g.Start) / g.Step))
		for i := max(0, lo); i <= min(hi, len(values)-1); i++ {
			values[i] = v
		}
	}
}

func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}
