package lines

import (
	"math"
	"testing"
)

// The series must agree with the error function to its stated accuracy, 2e-4
// of the peak at 0.8 pixels, and derivatives with differences.
func TestProfile(t *testing.T) {
	for _, sigma := range []float64{0.3, 0.6, 0.8, 1, 1.5, 2.1, 2.3, 4, 20} {
		g := newGauss(0.3, sigma, 1)
		exact := newGauss(0.3, sigma, 1)
		exact.exact = true
		peak, _, _ := exact.byErf(0.3)
		total := 0.0
		for x := -6 * sigma; x <= 6*sigma+1; x += 0.25 {
			v, dmu, ds := g.at(x)
			w, emu, es := exact.byErf(x)
			tol := 2.5e-4 * peak
			near(t, "value", v, w, tol)
			near(t, "derivative to the center", dmu, emu, 5*tol/sigma)
			near(t, "derivative to the width", ds, es, 8*tol/sigma)
			total += v * 0.25
			const h = 1e-5
			p, _, _ := newGaussAt(0.3+h, sigma, x)
			q, _, _ := newGaussAt(0.3-h, sigma, x)
			near(t, "difference to the center", (p-q)/(2*h), dmu, 1e-6+2*tol/sigma)
			p, _, _ = newGaussAt(0.3, sigma+h, x)
			q, _, _ = newGaussAt(0.3, sigma-h, x)
			if sigma != 0.8 { // where the series begins
				near(t, "difference to the width", (p-q)/(2*h), ds, 1e-6+4*tol/sigma)
			}
		}
		near(t, "area", total, 1, 1e-3)
	}
}

func newGaussAt(mu, sigma, x float64) (float64, float64, float64) {
	g := newGauss(mu, sigma, 1)
	return g.at(x)
}

func TestPixelEdges(t *testing.T) {
	wave := []float64{10, 11, 12, 20, 21}
	want := [][2]float64{{9.5, 10.5}, {10.5, 11.5}, {11.5, 12.75}, {19.25, 20.5}, {20.5, 21.5}}
	for i, w := range want {
		lo, hi := pixelEdges(wave, i)
		near(t, "low edge", lo, w[0], 1e-12)
		near(t, "high edge", hi, w[1], 1e-12)
	}
	if lo, hi := pixelEdges([]float64{5}, 0); lo != 5 || hi != 5 {
		t.Errorf("a lone pixel has edges %v, %v", lo, hi)
	}
}

// parabola is a linear problem whose minimum is known.
type parabola struct{ calls int }

func (q *parabola) normal(p, a, b []float64) float64 {
	q.calls++
	copy(a, []float64{4, 1, 0, 3})
	x, y := 1-p[0], -2-p[1]
	b[0], b[1] = 4*x+y, x+3*y
	return 4*x*x + 2*x*y + 3*y*y
}

func TestMarquardt(t *testing.T) {
	var m marquardt
	m.reset(2)
	q := &parabola{}
	if !m.minimize(q) {
		t.Fatal("not solved")
	}
	near(t, "x", m.p[0], 1, 1e-12)
	near(t, "y", m.p[1], -2, 1e-12)
	near(t, "chi2", m.chi2, 0, 1e-12)
	// Inverse of {{4,1},{1,3}}.
	for i, w := range []float64{3. / 11, -1. / 11, -1. / 11, 4. / 11} {
		near(t, "covariance", m.cov[i], w, 1e-12)
	}
	// A bound: the other parameter finds its minimum along it, 3 y + 2 = 0
	// shifted by x = 0.5, and the error of the held one is unknown.
	m.reset(2)
	m.hi[0] = 0.5
	if !m.minimize(q) {
		t.Fatal("not solved with a bound")
	}
	near(t, "x at the bound", m.p[0], 0.5, 0)
	near(t, "y at the bound", m.p[1], -2+0.5/3, 1e-6)
	near(t, "variance at the bound", m.cov[0], 0, 0)
	near(t, "variance of the other", m.cov[3], 1./3, 1e-12)
}

// The table against math.Exp: 8e-12 is the first term that the series leaves out.
func TestDecay(t *testing.T) {
	for x := 0.0; x < decayEnd; x += 0.00137 {
		if r := decay(x)/math.Exp(-x) - 1; math.Abs(r) > 1e-11 {
			t.Fatalf("exp(-%g) is off by %.2g", x, r)
		}
	}
	if decay(decayEnd) != 0 || decay(math.Inf(1)) != 0 || decay(math.NaN()) != 0 {
		t.Error("beyond the table it is not 0")
	}
}
