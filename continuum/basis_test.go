package continuum

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

func drawBasis(t *rapid.T) Basis {
	low := rapid.Float64Range(-5, 5).Draw(t, "low")
	return Basis{low, low + rapid.Float64Range(0.1, 10).Draw(t, "length"), rapid.IntRange(1, 40).Draw(t, "intervals")}
}

// deBoor is the recursion of de Boor (1978, A Practical Guide to Splines,
// chapter IX) for the B-spline of degree k that starts at knot j.
func deBoor(knot func(j int) float64, j, k int, x float64) float64 {
	if k == 0 {
		if knot(j) <= x && x < knot(j+1) {
			return 1
		}
		return 0
	}
	return (x-knot(j))/(knot(j+k)-knot(j))*deBoor(knot, j, k-1, x) +
		(knot(j+k+1)-x)/(knot(j+k+1)-knot(j+1))*deBoor(knot, j+1, k-1, x)
}

func TestBasisAgreesWithRecursion(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBasis(t)
		dx := (b.High - b.Low) / float64(b.Intervals)
		// Function j of the basis starts three knots before knot j of the range.
		knot := func(j int) float64 { return b.Low + float64(j-3)*dx }
		x := b.Low + (b.High-b.Low)*rapid.Float64Range(0, 1).Draw(t, "x")
		first, v := b.Eval(x)
		if first < 0 || first+3 >= b.Size() {
			t.Fatalf("functions %d to %d of %d", first, first+3, b.Size())
		}
		sum := 0.0
		for j := range b.Size() {
			got := 0.0
			if j >= first && j < first+4 {
				got = v[j-first]
			}
			sum += got
			// The position in knots is rounded to 1e-14 of a knot with x up to
			// 1e2 times the range away from zero; at the right end, a knot, the
			// recursion takes the next interval, where the values continue.
			if want := deBoor(knot, j, 3, x); math.Abs(got-want) > 1e-11 {
				t.Fatalf("function %d at %g: %.15g, want %.15g", j, x, got, want)
			}
		}
		if math.Abs(sum-1) > 1e-15*8 {
			t.Fatalf("the functions add up to %.17g at %g", sum, x)
		}
	})
}

func TestNewBasis(t *testing.T) {
	for _, c := range []struct {
		low, high, spacing float64
		intervals          int
	}{
		{0, 1, 0.1, 10}, {0, 1, 0.0999, 10}, {0, 1, 0.4, 3}, {0, 1, 5, 1}, {3.5, 3.5, 0.1, 1},
		// 18 interior knots between 3500 and 10500 Angstrom with the default
		// spacing, as configs/default.toml says.
		{math.Log10(3500), math.Log10(10500), 0.0251, 19},
	} {
		if b := NewBasis(c.low, c.high, c.spacing); b.Intervals != c.intervals {
			t.Errorf("NewBasis(%g, %g, %g) has %d intervals, want %d", c.low, c.high, c.spacing, b.Intervals, c.intervals)
		}
	}
}

// Beyond the range the polynomial of the end interval continues.
func TestBasisContinuesBeyondTheRange(t *testing.T) {
	b := Basis{0, 4, 4}
	coef := []float64{1, -2, 3, 0.5, -1, 2, 4}
	for _, side := range []struct{ inside, out float64 }{{0, -1}, {3, 5}} {
		// Cubics have constant third differences: four values inside the end
		// interval extrapolate.
		y := make([]float64, 4)
		x := make([]float64, 4)
		for i := range y {
			x[i] = side.inside + float64(i)/3.0
			y[i] = b.Value(coef, x[i])
		}
		want := 0.0
		for i := range y {
			l := y[i]
			for j := range x {
				if j != i {
					l *= (side.out - x[j]) / (x[i] - x[j])
				}
			}
			want += l
		}
		// Lagrange weights reach 1e2.
		if got := b.Value(coef, side.out); math.Abs(got-want) > 1e-11 {
			t.Errorf("Value(%g) = %g, want the cubic of the end interval, %g", side.out, got, want)
		}
	}
}

// dense writes the band matrix out.
func (n *Normal) dense() *mat.SymDense {
	m := mat.NewSymDense(n.size, nil)
	for i := range n.size {
		for k := 0; k <= band && i+k < n.size; k++ {
			m.SetSym(i, i+k, n.matrix[stride*i+k])
		}
	}
	return m
}

// designed fills normal equations and the dense matrices B and W of the same
// problem.
func designed(t *rapid.T, b Basis) (*Normal, *mat.Dense, *mat.DiagDense) {
	points := 8 * b.Size()
	design := mat.NewDense(points, b.Size(), nil)
	weights := make([]float64, points)
	var n Normal
	n.Reset(b.Size())
	for p := range points {
		x := b.Low + (b.High-b.Low)*(float64(p)+rapid.Float64Range(0, 1).Draw(t, "jitter"))/float64(points)
		weights[p] = rapid.Float64Range(0.1, 10).Draw(t, "weight")
		first, v := b.Eval(x)
		for a := range v {
			design.Set(p, first+a, v[a])
		}
		n.Add(first, &v, weights[p])
	}
	return &n, design, mat.NewDiagDense(points, weights)
}

// differences returns the matrix of differences of the given stencil.
func differences(size int, stencil []float64) *mat.Dense {
	d := mat.NewDense(max(1, size-len(stencil)+1), size, nil)
	for i := 0; i+len(stencil) <= size; i++ {
		for k, v := range stencil {
			d.Set(i, i+k, v)
		}
	}
	return d
}

// The equations are B^T W B plus D^T P D, and their solutions those of a
// dense solver.
func TestNormalAgainstDense(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := Basis{0, 1, rapid.IntRange(1, 12).Draw(t, "intervals")}
		n, design, weights := designed(t, b)
		size := b.Size()
		var want, wb mat.Dense
		wb.Mul(weights, design)
		want.Mul(design.T(), &wb)

		lambda := math.Pow(10, rapid.Float64Range(-9, 1).Draw(t, "log lambda"))
		mean := mat.Trace(&want) / float64(size)
		var penalty mat.Dense
		second := differences(size, []float64{1, -2, 1})
		penalty.Mul(second.T(), second)
		penalty.Scale(lambda*mean, &penalty)
		want.Add(&want, &penalty)
		n.Ridge(lambda)

		if size > 4 {
			precision := make([]float64, size-4)
			for i := range precision {
				precision[i] = rapid.Float64Range(0, 100).Draw(t, "precision")
			}
			n.Stiffen(func(i int) float64 { return precision[i] })
			fourthD := differences(size, []float64{1, -4, 6, -4, 1})
			var pd mat.Dense
			pd.Mul(mat.NewDiagDense(size-4, precision), fourthD)
			penalty.Reset()
			penalty.Mul(fourthD.T(), &pd)
			want.Add(&want, &penalty)
		}
		scale := mat.Max(&want)
		// Sums of a hundred products in another order.
		if got := n.dense(); !mat.EqualApprox(got, &want, 1e-12*scale) {
			t.Fatalf("equations\n%v\nwant\n%v", mat.Formatted(got), mat.Formatted(&want))
		}

		if !n.Factor() {
			t.Fatal("equations of a full problem are singular")
		}
		cols := rapid.IntRange(1, 5).Draw(t, "columns")
		y := mat.NewDense(size, cols, nil)
		for i := range size {
			for c := range cols {
				y.Set(i, c, rapid.Float64Range(-1, 1).Draw(t, "y"))
			}
		}
		var solved mat.Dense
		if err := solved.Solve(&want, y); err != nil {
			t.Fatal(err)
		}
		got := append([]float64(nil), y.RawMatrix().Data...)
		n.SolveMany(got, cols)
		// Both solvers are backward stable: the error is the condition of the
		// matrix times 1e-16, with some room for its size.
		tol := 1e-14 * mat.Cond(&want, 2) * mat.Norm(&solved, math.Inf(1))
		for i := range got {
			if w := solved.RawMatrix().Data[i]; math.Abs(got[i]-w) > tol {
				t.Fatalf("solution %d: %.15g, want %.15g within %g", i, got[i], w, tol)
			}
		}
		column := make([]float64, size)
		for i := range column {
			column[i] = y.At(i, 0)
		}
		n.Solve(column)
		for i := range column {
			if column[i] != got[i*cols] {
				t.Fatalf("Solve and SolveMany differ: %v, %v", column[i], got[i*cols])
			}
		}
	})
}

// The fourth differences that Stiffen damps: the gain of a wave of L knots is
// (2 sin(pi/L))^4, as its comment says, and cubics are free.
func TestStiffenGain(t *testing.T) {
	for _, c := range []struct{ length, gain float64 }{{4, 4}, {8, 0.343}, {16, 0.0232}} {
		if want := math.Pow(2*math.Sin(math.Pi/c.length), 4); math.Abs(want-c.gain) > 0.001*c.gain*5 {
			t.Errorf("a wave of %g knots: gain %.4f, the comment says %.4f", c.length, want, c.gain)
		}
		const size = 400
		var n Normal
		n.Reset(size)
		n.Stiffen(func(int) float64 { return 1 })
		// Inside, away from the ends, a wave is an eigenvector of D^T D with
		// the squared gain.
		wave := mat.NewVecDense(size, nil)
		for i := range size {
			wave.SetVec(i, math.Cos(2*math.Pi*float64(i)/c.length))
		}
		var out mat.VecDense
		out.MulVec(n.dense(), wave)
		if got, want := out.AtVec(size/2), math.Pow(2*math.Sin(math.Pi/c.length), 8)*wave.AtVec(size/2); math.Abs(got-want) > 1e-12 {
			t.Errorf("a wave of %g knots: D^T D gives %g, want %g", c.length, got, want)
		}
	}
	var n Normal
	n.Reset(30)
	n.Stiffen(func(int) float64 { return 1 })
	for power := range 4 {
		cubic := mat.NewVecDense(30, nil)
		for i := range 30 {
			cubic.SetVec(i, math.Pow(float64(i)/30, float64(power)))
		}
		var out mat.VecDense
		out.MulVec(n.dense(), cubic)
		if got := mat.Norm(&out, 2); got > 1e-13 {
			t.Errorf("power %d is penalized by %g", power, got)
		}
	}
}

func TestFactorReportsSingularEquations(t *testing.T) {
	var n Normal
	n.Reset(10)
	if n.Factor() {
		t.Error("equations without points were factored")
	}
	b := Basis{0, 1, 7}
	for _, x := range []float64{0.1, 0.11, 0.12, 0.13} {
		first, v := b.Eval(x)
		n.Add(first, &v, 1)
	}
	if n.Factor() {
		t.Error("ten coefficients were found from four points")
	}
}

func BenchmarkSolveMany(b *testing.B) {
	for _, cols := range []int{1, 8} {
		b.Run(fmt.Sprintf("%d_columns", cols), func(b *testing.B) {
			basis := Basis{0, 1, 76}
			var n Normal
			n.Reset(basis.Size())
			for p := range 4600 {
				first, v := basis.Eval(float64(p) / 4600)
				n.Add(first, &v, 1)
			}
			n.Factor()
			y := make([]float64, basis.Size()*cols)
			b.ReportAllocs()
			for b.Loop() {
				for i := range y {
					y[i] = 1
				}
				n.SolveMany(y, cols)
			}
		})
	}
}
