package pipeline

import (
	"math"

	"duskline/spectrum"
)

// complexes are the rest wavelengths, vacuum Angstrom, between which blends of
// broad lines hide the continuum of a quasar: O I with C II, Si IV, C IV down to the minimum before
// He II, Al III with Si III] and C III], Mg II (the ends of Vanden Berk et al. 2001, AJ
// 122, 549, table 2, from memory), and H-beta with [O III] (between the windows of
// Shen et al. 2011, ApJS 194, 45, from memory).
var complexes = [][2]float64{{1283, 1357}, {1357, 1446}, {1494, 1620}, {1830, 1976}, {2686, 2913}, {4700, 5100}}

const (
	// sideHalf is half the width, rest Angstrom, of the two windows at the ends of
	// a complex. Common practice, no source.
	sideHalf = 10.0
	// sideLeast is how many good pixels each window needs.
	sideLeast = 10
)

// bridgeComplex writes the pseudo-continuum of a complex over its pixels: a power
// law through the medians of two windows centered on its ends. The weight of both
// windows is spread over the bridge, so that the error of the spline is that of
// what is seen; but none is better than extrapolationDoubt. A window in a trough has
// the value of the power law across that. Where a window is not covered, or not positive, nothing is done: the masks of the lines remain.
func (l *level) bridgeComplex(g *spectrum.Grid, m *masker, ends [2]float64, z1 float64) {
	var x, level [2]float64
	weight := math.Inf(1)
	for k, end := range ends {
		from, to := (end-sideHalf)*z1, (end+sideHalf)*z1
		f, w := l.seen(g, m, from, to)
		if p := l.inTrough(m.pixels(from, to)); p != nil {
			f, w = p.value(end*z1), math.Inf(1)
		}
		if !(f > 0) {
			return
		}
		x[k], level[k] = math.Log(end*z1), f
		weight = min(weight, w)
	}
	lo, hi := m.pixels(ends[0]*z1, ends[1]*z1)
	slope := math.Log(level[1]/level[0]) / (x[1] - x[0])
	for i := lo; i < hi; i++ {
		f := level[0] * math.Exp(slope*(g.LogWave(i)*math.Ln10-x[0]))
		l.flux[i] = f
		l.ivar[i] = min(weight, 1/(extrapolationDoubt*extrapolationDoubt*f*f))
	}
}
