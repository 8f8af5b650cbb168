// Package continuum fits the continuum of a spectrum with an iterative,
// asymmetrically clipped least-squares spline.
//
// The spline is cubic with knots uniform in log wavelength. Uniform B-splines
// span the same space as B-splines with repeated end knots (de Boor 1978, A
// Practical Guide to Splines), with one polynomial table for all intervals, so
// the normal equations are banded with three off-diagonals and solved by a
// banded Cholesky factorization.
package continuum

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/lapack/lapack64"
)

// Basis is a cubic B-spline basis with uniform knots on [Low, High], split
// into Intervals pieces. It has Intervals+3 functions, of which four are
// non-zero anywhere.
type Basis struct {
	Low, High float64
	Intervals int
}

// NewBasis returns the basis on [low, high] whose knots are as near to spacing
// apart as a whole number of intervals (at least one) allows.
func NewBasis(low, high, spacing float64) Basis {
	return Basis{low, high, max(1, int(math.Round((high-low)/spacing)))}
}

// Size returns the number of basis functions.
func (b Basis) Size() int { return b.Intervals + 3 }

// Eval returns the four basis functions that are non-zero at x and the index
// of the first. Outside [Low, High] the polynomial of the end interval
// continues.
func (b Basis) Eval(x float64) (first int, v [4]float64) {
	t := (x - b.Low) / (b.High - b.Low) * float64(b.Intervals)
	i := int(math.Floor(t))
	i = max(0, min(i, b.Intervals-1))
	u := t - float64(i)
	u2, q := u*u, 1-u
	v[0] = q * q * q / 6
	v[1] = (3*u2*u - 6*u2 + 4) / 6
	v[2] = (-3*u2*u + 3*u2 + 3*u + 1) / 6
	v[3] = u2 * u / 6
	return i, v
}

// Value returns sum_j coef[j] B_j(x).
func (b Basis) Value(coef []float64, x float64) float64 {
	i, v := b.Eval(x)
	return v[0]*coef[i] + v[1]*coef[i+1] + v[2]*coef[i+2] + v[3]*coef[i+3]
}

// band is the number of off-diagonals of the normal equations: three for the
// basis, four for the penalty on fourth differences.
const band = 4

const stride = band + 1

// Normal holds the banded normal equations A s = y of a weighted least-squares
// spline, A = B^T W B plus penalties. The zero value is ready for Reset.
type Normal struct {
	size   int
	matrix []float64 // upper band, row-major, stride a row
	work   []float64
	factor blas64.TriangularBand
}

// Reset empties the equations for a basis of size functions.
func (n *Normal) Reset(size int) {
	n.size = size
	n.matrix, n.work = grow(n.matrix, stride*size), grow(n.work, stride*size)
	clear(n.matrix)
}

// Add adds a point of weight w where the basis has values v from index i on.
func (n *Normal) Add(i int, v *[4]float64, w float64) {
	for a := 0; a < 4; a++ {
		row := n.matrix[stride*(i+a):]
		wv := w * v[a]
		for b := a; b < 4; b++ {
			row[b-a] += wv * v[b]
		}
	}
}

// Ridge adds lambda times the squared second differences of the coefficients,
// relative to the mean diagonal (a P-spline penalty, Eilers & Marx 1996). A
// tiny one carries the spline smoothly over gaps without data, where the
// equations would be singular.
func (n *Normal) Ridge(lambda float64) {
	mean := 0.0
	for i := 0; i < n.size; i++ {
		mean += n.matrix[stride*i]
	}
	p := lambda * mean / float64(n.size)
	for i := 0; i+2 < n.size; i++ {
		n.difference(i, p, second)
	}
}

var (
	second = []float64{1, -2, 1}
	fourth = []float64{1, -4, 6, -4, 1}
)

// Stiffen adds the penalty precision(i) times the squared fourth difference of
// the coefficients i to i+4, for all i: a Gaussian prior on the continuum that
// leaves slow changes free and limits fast ones (Eilers & Marx 1996). The gain
// of the fourth difference for a wave of L knots is (2 sin(pi/L))^4, 4 at
// L = 4, 0.34 at L = 8 and 0.02 at L = 16.
func (n *Normal) Stiffen(precision func(i int) float64) {
	for i := 0; i+4 < n.size; i++ {
		n.difference(i, precision(i), fourth)
	}
}

func (n *Normal) difference(i int, p float64, d []float64) {
	for a := range d {
		row := n.matrix[stride*(i+a):]
		for b := a; b < len(d); b++ {
			row[b-a] += p * d[a] * d[b]
		}
	}
}

// Factor computes the Cholesky factor. It reports false when the equations are
// not positive definite, which happens when too few points carry weight.
func (n *Normal) Factor() bool {
	copy(n.work, n.matrix)
	t, ok := lapack64.Pbtrf(blas64.SymmetricBand{Uplo: blas.Upper, N: n.size, K: band, Stride: stride, Data: n.work})
	n.factor = t
	return ok
}

// Solve replaces y by the solution s of A s = y. Factor must have succeeded.
func (n *Normal) Solve(y []float64) { n.SolveMany(y, 1) }

// SolveMany replaces each column of the row-major matrix y, with cols columns,
// by the solution for it. It works along rows, all columns at once, which for
// a handful of columns is several times faster than one band solve a column.
func (n *Normal) SolveMany(y []float64, cols int) {
	u := n.factor.Data
	for i := 0; i < n.size; i++ {
		row := y[i*cols : (i+1)*cols]
		for k := 1; k <= band && k <= i; k++ {
			f := u[stride*(i-k)+k]
			for c, v := range y[(i-k)*cols : (i-k+1)*cols] {
				row[c] -= f * v
			}
		}
		d := 1 / u[stride*i]
		for c := range row {
			row[c] *= d
		}
	}
	for i := n.size - 1; i >= 0; i-- {
		row := y[i*cols : (i+1)*cols]
		for k := 1; k <= band && i+k < n.size; k++ {
			f := u[stride*i+k]
			for c, v := range y[(i+k)*cols : (i+k+1)*cols] {
				row[c] -= f * v
			}
		}
		d := 1 / u[stride*i]
		for c := range row {
			row[c] *= d
		}
	}
}
