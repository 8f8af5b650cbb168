package absorbers

import (
	"math"

	"duskline/hydrogen"
)

// Column is a column density read from an equivalent width.
type Column struct {
	LogN float64 // log10 of cm^-2
	// Err is the standard error from the equivalent width's and the Doppler
	// parameter's, by the slopes of the curve of growth.
	Err float64
	// Slope is d ln W / d ln N at the solution: 1 where the line is thin, 1/2
	// where it is damped, near 0 on the flat part between.
	Slope float64
	// BSlope is d ln W / d ln b at constant N.
	BSlope float64
	// Low and High are the columns that one standard error of W and b would
	// give, by the curve itself: where it is flat they lie far apart, and Err
	// means little.
	Low, High float64
	// Flat is true where W hardly tells N: Slope below FlatSlope.
	Flat bool
}

// FlatSlope is the slope of the curve of growth below which a column density is
// called degenerate: an error of W is then magnified at least four times.
const FlatSlope = 0.25

// Range of log N in which ColumnOf looks.
const minLogN, maxLogN = 8.0, 24.0

// ColumnOf inverts the curve of growth of hydrogen.EquivalentWidth for one line:
// the column density of which the rest equivalent width is w +- wErr Angstrom at
// Doppler parameter b +- bErr km/s. W grows with N without bound, so there is one
// solution; it is found to 1e-7 in log N by bisection and the method of Newton.
//
// NaN where w or b is not positive, or no column from 1e8 to 1e24 gives w.
func ColumnOf(line hydrogen.AbsorptionLine, w, wErr, b, bErr float64) Column {
	nan := math.NaN()
	bad := Column{nan, nan, nan, nan, nan, nan, false}
	if !(w > 0) || !(b > 0) {
		return bad
	}
	c := bad
	if c.LogN = solveGrowth(line, w, b); math.IsNaN(c.LogN) {
		return bad
	}
	const h = 1e-3 // in log10, central differences: error of order h^2
	at := func(logN, b float64) float64 { return math.Log10(line.EquivalentWidth(math.Pow(10, logN), b)) }
	c.Slope = (at(c.LogN+h, b) - at(c.LogN-h, b)) / (2 * h)
	up := math.Pow(10, h)
	c.BSlope = (at(c.LogN, b*up) - at(c.LogN, b/up)) / (2 * h)
	c.Flat = c.Slope < FlatSlope
	c.Err = math.Hypot(wErr/w, c.BSlope*bErr/b) / (math.Ln10 * c.Slope)
	// A larger b needs less column for the same width.
	spread := math.Hypot(wErr/w, c.BSlope*bErr/b)
	c.High = solveGrowth(line, w*(1+spread), b)
	if c.Low = 0; spread < 1 {
		c.Low = solveGrowth(line, w*(1-spread), b)
	}
	return c
}

// solveGrowth returns log N of an equivalent width, NaN out of range.
func solveGrowth(line hydrogen.AbsorptionLine, w, b float64) float64 {
	target := math.Log(w)
	excess := func(logN float64) float64 { return math.Log(line.EquivalentWidth(math.Pow(10, logN), b)) - target }
	lo, hi := minLogN, maxLogN
	if !(excess(lo) < 0) || !(excess(hi) > 0) {
		return math.NaN()
	}
	for hi-lo > 0.02 {
		if mid := 0.5 * (lo + hi); excess(mid) < 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	// Secants inside the bracket.
	x, fx, y, fy := lo, excess(lo), hi, excess(hi)
	for range 20 {
		z := x - fx*(y-x)/(fy-fx)
		fz := excess(z)
		if math.Abs(fz) < 1e-9 || math.Abs(y-x) < 1e-9 {
			return z
		}
		if (fz < 0) == (fx < 0) {
			x, fx = z, fz
		} else {
			y, fy = z, fz
		}
	}
	return 0.5 * (x + y)
}
