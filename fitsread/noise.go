package fitsread

import (
	"math"
	"slices"

	"duskline/spectrum"
)

// Robust noise of a spectrum after Stoehr et al. 2008 (ADASS XVII, ASP Conf. Ser.
// 394, 505): sigma = 1.482602/sqrt(6) median |2 f(i) - f(i-2) - f(i+2)|. Pixels
// two apart are compared because neighbors are often correlated.
const (
	madToSigma = 1.482602
	stoehr     = madToSigma / 2.449489742783178
)

// scatter returns the noise of flux as a whole; NaN pixels are skipped. It is 0
// where fewer than five pixels allow no estimate.
func scatter(flux []float64) float64 {
	return stoehr * medianOf(differences(nil, flux, nil))
}

// differences appends |2 f(i) - f(i-2) - f(i+2)| of finite pixels to dst; where
// ivar is given, only of pixels with weight.
func differences(dst, flux, ivar []float64) []float64 {
	for i := 2; i+2 < len(flux); i++ {
		if ivar != nil && !(ivar[i-2] > 0 && ivar[i] > 0 && ivar[i+2] > 0) {
			continue
		}
		if d := math.Abs(2*flux[i] - flux[i-2] - flux[i+2]); d-d == 0 {
			dst = append(dst, d)
		}
	}
	return dst
}

// medianOf is spectrum.Median with 0 for the median of nothing.
func medianOf(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	return spectrum.Median(v)
}

func medianPositive(v []float64) float64 {
	var p []float64
	for _, x := range v {
		if x > 0 && !math.IsInf(x, 0) {
			p = append(p, x)
		}
	}
	return medianOf(p)
}

// noiseWindow is the number of pixels over which noise is taken as constant:
// wide enough for the median (5 % error), narrow enough to follow the throughput
// and the sky of a spectrograph.
const noiseWindow = 300

// noiseFloor is the least noise relative to the typical flux that an estimate
// may give: models and smoothed library spectra have none, and infinite weights
// help nobody.
const noiseFloor = 1e-3

// estimateIvar fills ivar, where it is positive, with the inverse variance that
// the local scatter of the flux shows: scatter in windows of 300 pixels,
// interpolated linearly between their centers, not below 1e-3 of the median
// absolute flux.
func estimateIvar(flux, ivar []float64) {
	n := len(flux)
	var level []float64
	for i, v := range flux {
		if ivar[i] > 0 {
			level = append(level, math.Abs(v))
		}
	}
	floor := noiseFloor * medianOf(level)
	windows := max(1, (n+noiseWindow/2)/noiseWindow)
	sigma := make([]float64, windows)
	var scratch []float64
	whole := stoehr * medianOf(differences(nil, flux, ivar))
	for k := range sigma {
		lo, hi := k*n/windows, (k+1)*n/windows
		scratch = differences(scratch[:0], flux[lo:hi], ivar[lo:hi])
		sigma[k] = whole
		if len(scratch) >= 20 {
			sigma[k] = stoehr * medianOf(scratch)
		}
		sigma[k] = math.Max(sigma[k], floor)
	}
	for i := range ivar {
		if !(ivar[i] > 0) {
			continue
		}
		x := (float64(i)+0.5)*float64(windows)/float64(n) - 0.5
		k := min(max(int(math.Floor(x)), 0), max(windows-2, 0))
		s := sigma[k]
		if windows > 1 {
			t := math.Min(math.Max(x-float64(k), 0), 1)
			s += t * (sigma[k+1] - sigma[k])
		}
		ivar[i] = 0
		if w := 1 / (s * s); s > 0 && !math.IsInf(w, 0) {
			ivar[i] = w
		}
	}
}

// scatterRatio compares the scatter of the flux with the stated errors: the
// median of |2 f(i) - f(i-2) - f(i+2)| over its expected error, times 1.4826, is
// 1 for independent errors that are right. suspect is true below 1/3, and above 3
// where it is noise that scatters and not the lines of the object itself, which
// at high S/N exceed it: where pixels below S/N 20 show the same, or where the
// excess is even, see isEven. 100 pixels must remain for either.
func scatterRatio(flux, ivar []float64) (ratio float64, suspect bool) {
	const least, maxSN = 100, 20
	at := stated(flux, ivar, math.Inf(1))
	q := known(nil, at)
	if len(q) < least {
		return 0, false
	}
	if ratio = madToSigma * medianOf(q); ratio <= 3 {
		return ratio, ratio < 1.0/3
	}
	if isEven(at, ratio) {
		return ratio, true
	}
	if q = known(nil, stated(flux, ivar, maxSN*maxSN)); len(q) < least {
		return ratio, false
	}
	ratio = madToSigma * medianOf(q)
	return ratio, ratio > 3
}

// isEven reports whether the quietest quarter of windows of 100 pixels scatters
// hardly less than all do. For noise it is 0.91 of it: the median of 100 scatters
// by some 14 % (1.17/sqrt(n) and the correlation of neighbors), and the lower
// quartile lies 0.67 of that below. 0.75 leaves as much again for stated errors
// that are off by different factors along the spectrum. The lines of stars leave
// quiet windows: in spectra of S/N 300 to 9000 it is 0.4 to 0.72 of all.
func isEven(at []float64, ratio float64) bool {
	const window, leastWindows, share = 100, 4, 0.75
	var quiet, one []float64
	for i := 0; i < len(at); i += window {
		if one = known(one[:0], at[i:min(i+window, len(at))]); len(one) >= window/2 {
			quiet = append(quiet, madToSigma*spectrum.Median(one))
		}
	}
	if len(quiet) < leastWindows {
		return false
	}
	slices.Sort(quiet)
	return quiet[len(quiet)/4] >= share*ratio
}

// stated returns for every pixel |2 f(i) - f(i-2) - f(i+2)| over its stated error,
// NaN where a pixel has no weight or its squared S/N is limit or more.
func stated(flux, ivar []float64, limit float64) []float64 {
	out := make([]float64, len(flux))
	for i := range out {
		out[i] = math.NaN()
		if i < 2 || i+2 >= len(flux) {
			continue
		}
		a, b, c := ivar[i-2], ivar[i], ivar[i+2]
		if !(a > 0 && b > 0 && c > 0) || flux[i]*flux[i]*b >= limit {
			continue
		}
		out[i] = math.Abs(2*flux[i]-flux[i-2]-flux[i+2]) / math.Sqrt(4/b+1/a+1/c)
	}
	return out
}

// known appends the finite numbers of v to dst.
func known(dst, v []float64) []float64 {
	for _, x := range v {
		if x-x == 0 {
			dst = append(dst, x)
		}
	}
	return dst
}
