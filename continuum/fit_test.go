package continuum

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"os/exec"
	"slices"
	"testing"

	"duskline/internal/outside"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// once fits without clipping.
var once = Options{Spacing: 0.1, Iterations: 1}

func axis(n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = float64(i) / float64(n-1)
	}
	return x
}

func fitted(t testing.TB, x, flux, ivar []float64, opt Options) *Fitter {
	t.Helper()
	f := &Fitter{}
	if err := f.Fit(x, flux, ivar, opt); err != nil {
		t.Fatal(err)
	}
	return f
}

func constant(n int, v float64) []float64 {
	s := make([]float64, n)
	for i := range s {
		s[i] = v
	}
	return s
}

// A cubic is reproduced whatever the weights.
func TestFitReproducesCubics(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(200, 600).Draw(t, "points")
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 0))
		x, flux, ivar := axis(n), make([]float64, n), make([]float64, n)
		var c [4]float64
		for k := range c {
			c[k] = rapid.Float64Range(-3, 3).Draw(t, "coefficient")
		}
		cubic := func(v float64) float64 { return c[0] + v*(c[1]+v*(c[2]+v*c[3])) }
		for i, v := range x {
			flux[i], ivar[i] = cubic(v), math.Exp(r.NormFloat64())
			if i%7 == 3 && i < n-1 {
				flux[i], ivar[i] = math.NaN(), 0
			}
		}
		var f Fitter
		if err := f.Fit(x, flux, ivar, once); err != nil {
			t.Fatal(err)
		}
		// The ridge of 1e-9 acts on second differences, which knots 0.1 apart
		// make 0.02 c2 and up to 0.06 c3; the ends are held a thousand times
		// less than the middle. The solve rounds at 1e-13 of the values.
		tol := 1e-7*(math.Abs(c[2])+math.Abs(c[3])) + 1e-11
		for i, v := range x {
			if got := f.Value(v); math.Abs(got-cubic(v)) > tol {
				t.Fatalf("point %d: %.12g, want %.12g within %.2g", i, got, cubic(v), tol)
			}
		}
	})
}

// rough returns 4,000 points of a noisy wavy spectrum with uneven weights,
// among them stretches of zeros shorter than a knot interval.
func rough() (x, flux, ivar []float64) {
	r := rand.New(rand.NewPCG(7, 1))
	const n = 4000
	x, flux, ivar = make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range x {
		x[i] = 3.55 + 1e-4*float64(i)
		sigma := 0.05 * (1.5 + math.Sin(40*x[i]))
		flux[i] = 2 + math.Sin(25*x[i]) + 0.3*math.Cos(90*x[i]) + sigma*r.NormFloat64()
		ivar[i] = 1 / (sigma * sigma)
		if i%11 == 5 || (i > 1500 && i < 1570) {
			ivar[i] = 0
		}
	}
	return x, flux, ivar
}

// The spline is that of scipy.interpolate.make_lsq_spline (scipy 1.10, live)
// on the same interior knots. Uniform knots beyond the ends span the same
// splines as repeated end knots.
func TestFitAgreesWithScipy(t *testing.T) {
	python := outside.Python(t, "scipy.interpolate")
	x, flux, ivar := rough()
	f := fitted(t, x, flux, ivar, Options{Spacing: 0.0251, Iterations: 1})
	b := f.Basis()
	knots := make([]float64, b.Intervals+1)
	for i := range knots {
		knots[i] = b.Low + (b.High-b.Low)*float64(i)/float64(b.Intervals)
	}
	knots[b.Intervals] = b.High
	in, err := json.Marshal(map[string][]float64{"x": x, "flux": flux, "ivar": ivar, "knots": knots})
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("timeout", "60", python, "testdata/lsq_spline.py")
	cmd.Stdin = bytes.NewReader(in)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%v\n%s", err, stderr.String())
	}
	var want []float64
	if err := json.Unmarshal(out, &want); err != nil {
		t.Fatal(err)
	}
	if len(want) != len(x) {
		t.Fatalf("%d values from scipy, want %d", len(want), len(x))
	}
	// What the comment on the ridge promises, for a range of 2.6.
	inner, ends := 0.0, 0.0
	for i, v := range x {
		d := math.Abs(f.Value(v) - want[i])
		if edge := 2 * 0.0251; v > x[0]+edge && v < x[len(x)-1]-edge {
			inner = math.Max(inner, d)
		} else {
			ends = math.Max(ends, d)
		}
	}
	if inner > 2.6e-7 || ends > 2.6e-6 {
		t.Errorf("differs from scipy by %.3g inside and %.3g at the ends, want less than 2.6e-7 and 2.6e-6", inner, ends)
	}
}

func TestFitTooFew(t *testing.T) {
	var f Fitter
	for _, good := range []int{0, 1, 7} {
		x, ivar := axis(50), make([]float64, 50)
		for i := range good {
			ivar[5*i] = 1
		}
		if err := f.Fit(x, constant(50, 1), ivar, once); !errors.Is(err, ErrTooFew) {
			t.Errorf("%d points with weight: %v, want ErrTooFew", good, err)
		}
	}
	if err := f.Fit(nil, nil, nil, once); !errors.Is(err, ErrTooFew) {
		t.Errorf("no points: %v, want ErrTooFew", err)
	}
	// Eight are enough, even when knots are closer than points: the ridge holds.
	x := axis(50)
	ivar := make([]float64, 50)
	for i := range 8 {
		ivar[7*i] = 1
	}
	fit := fitted(t, x, constant(50, 3), ivar, Options{Spacing: 0.02, Iterations: 1})
	for _, v := range x {
		// The second differences of a constant are zero, so the ridge does not
		// move it; but with most coefficients held by the ridge of 1e-9 alone
		// the equations are conditioned like 1e11.
		if got := fit.Value(v); math.Abs(got-3) > 1e-4 {
			t.Errorf("a constant from eight points is %g at %g", got, v)
		}
	}
}

// Spikes of both signs are left out and the fit comes out as if they had no
// weight.
func TestFitClipsSpikes(t *testing.T) {
	x, flux, ivar := rough()
	clean := slices.Clone(ivar)
	spiked := slices.Clone(flux)
	taken := 0
	for i := 20; i < len(x); i += 97 {
		if ivar[i] > 0 {
			taken++
			clean[i] = 0
			spiked[i] += math.Copysign(40/math.Sqrt(ivar[i]), float64(i%2)-0.5)
		}
	}
	opt := Options{Spacing: 0.0251, ClipLow: 6, ClipHigh: 6, Iterations: 10}
	f := fitted(t, x, spiked, ivar, opt)
	if f.Clipped() != taken {
		t.Errorf("%d points left out, want the %d spikes", f.Clipped(), taken)
	}
	want := fitted(t, x, flux, clean, Options{Spacing: 0.0251, Iterations: 1})
	for _, v := range x {
		// The same points, in the same order, on the same knots.
		if f.Value(v) != want.Value(v) {
			t.Fatalf("at %g: %.15g with spikes clipped, %.15g without spikes", v, f.Value(v), want.Value(v))
		}
	}
	// A growth of one takes the neighbors along; those without weight do not
	// count.
	grown := opt
	grown.Grow = 1
	extra := fitted(t, x, spiked, ivar, grown).Clipped()
	if extra <= 2*taken || extra > 3*taken {
		t.Errorf("%d points left out with a growth of one, want two to three for each of %d spikes", extra, taken)
	}
}

// Each side has its own limit, and zero never clips.
func TestFitClipsEachSide(t *testing.T) {
	const n = 600
	x, flux := axis(n), make([]float64, n)
	for i := range flux {
		flux[i] = 0.5 * math.Sin(float64(i*i)) // a scatter below one
		switch i % 50 {
		case 10:
			flux[i] = 8
		case 35:
			flux[i] = -8
		}
	}
	for _, c := range []struct {
		low, high float64
		want      int
	}{{6, 6, 24}, {6, 0, 12}, {0, 6, 12}, {0, 0, 0}, {6, 10, 12}, {10, 6, 12}, {10, 10, 0}} {
		f := fitted(t, x, flux, constant(n, 1), Options{Spacing: 0.2, ClipLow: c.low, ClipHigh: c.high, Iterations: 5})
		if f.Clipped() != c.want {
			t.Errorf("limits %g below and %g above: %d points left out, want %d", c.low, c.high, f.Clipped(), c.want)
		}
	}
}

// Clipping below follows the upper envelope: absorption lines over a tenth of
// the range do not pull the continuum down.
func TestFitAsymmetricClip(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	const n, noise = 3000, 0.01
	x, flux, ivar := axis(n), make([]float64, n), constant(n, 1/(noise*noise))
	truth := func(v float64) float64 { return 1 + 0.3*v }
	for i, v := range x {
		flux[i] = truth(v) + noise*r.NormFloat64()
		for line := 0.05; line < 1; line += 0.1 {
			u := (v - line) / 0.003
			flux[i] -= 0.5 * truth(v) * math.Exp(-0.5*u*u)
		}
	}
	worst := func(opt Options) float64 {
		f := fitted(t, x, flux, ivar, opt)
		w := 0.0
		for _, v := range x {
			w = math.Max(w, math.Abs(f.Value(v)-truth(v)))
		}
		return w
	}
	pulled := worst(Options{Spacing: 0.05, Iterations: 1})
	clipped := worst(Options{Spacing: 0.05, ClipLow: 2.5, ClipHigh: 3.5, Iterations: 6})
	// An interval holds 150 points: 0.01/sqrt(150) with an edge factor of two
	// and four sigma is 0.7 % of the continuum; wings of the lines below the
	// clip take as much again.
	if clipped > 0.015 {
		t.Errorf("the clipped continuum is off by %.4f", clipped)
	}
	if pulled < 3*clipped {
		t.Errorf("without clipping the continuum is off by %.4f: the lines of this test pull too little to show anything", pulled)
	}
}

// Clipping stops before it takes half of the points.
func TestFitNeverClipsHalf(t *testing.T) {
	const n = 400
	x, flux := axis(n), make([]float64, n)
	for i := range flux {
		flux[i] = float64(i%2) * 100
	}
	f := fitted(t, x, flux, constant(n, 1), Options{Spacing: 0.2, ClipLow: 0.5, ClipHigh: 0.5, Iterations: 10})
	if f.Clipped() != 0 {
		t.Errorf("%d of %d points left out", f.Clipped(), n)
	}
	for i := range 190 {
		flux[2*i] = 50 // 48 % of the points stay on one side
	}
	f = fitted(t, x, flux, constant(n, 1), Options{Spacing: 0.2, ClipLow: 0.1, ClipHigh: 0.1, Iterations: 10})
	if 2*f.Clipped() > n {
		t.Errorf("%d of %d points left out", f.Clipped(), n)
	}
}

// A hole is bridged without a swing: by no more than the errors of value and
// slope at its two sides make of it, and those stay near the noise of a pixel.
func TestFitBridgesHoles(t *testing.T) {
	const n, noise = 4000, 0.1
	x, ivar := axis(n), constant(n, 1/(noise*noise))
	truth := func(v float64) float64 { return 5 + 2*v - v*v }
	hole := func(v float64) bool { return v > 0.4 && v < 0.6 } // four knots
	for i, v := range x {
		if hole(v) {
			ivar[i] = 0
		}
	}
	// The covariance of the coefficients under noise: A^-1 (B^T W B) A^-1.
	b := NewBasis(0, 1, 0.05)
	size := b.Size()
	var data, all Normal
	data.Reset(size)
	all.Reset(size)
	for i, v := range x {
		if ivar[i] > 0 {
			first, f := b.Eval(v)
			data.Add(first, &f, ivar[i])
			all.Add(first, &f, ivar[i])
		}
	}
	all.Ridge(ridge)
	var inverse, half, cov mat.Dense
	if err := inverse.Inverse(all.dense()); err != nil {
		t.Fatal(err)
	}
	half.Mul(&inverse, data.dense())
	cov.Mul(&half, &inverse)
	widest := 0.0
	for seed := range uint64(20) {
		r := rand.New(rand.NewPCG(seed, 8))
		flux := make([]float64, n)
		for i, v := range x {
			flux[i] = truth(v) + noise*r.NormFloat64()
			if ivar[i] == 0 {
				flux[i] = math.NaN()
			}
		}
		f := fitted(t, x, flux, ivar, Options{Spacing: 0.05, Iterations: 1})
		for _, v := range x {
			first, w := b.Eval(v)
			variance := 0.0
			for i := range w {
				for j := range w {
					variance += w[i] * w[j] * cov.At(first+i, first+j)
				}
			}
			sigma := math.Sqrt(variance)
			widest = math.Max(widest, sigma)
			// Five sigma: 20 fits of some 25 independent values each.
			if got := f.Value(v); math.Abs(got-truth(v)) > 5*sigma {
				t.Fatalf("seed %d at %g: %.4f, want %.4f within %.4f", seed, v, got, truth(v), 5*sigma)
			}
		}
	}
	// 2.4 by this calculation; free cubics over four intervals would scatter
	// by tens.
	if widest > 4*noise {
		t.Errorf("the bridge scatters by %.2f, more than four times the noise of a pixel", widest)
	}
}

// The ends are held beyond the fitted points.
func TestValueHoldsEnds(t *testing.T) {
	n := 100
	x, ivar := axis(n), constant(n, 1)
	ivar[0], ivar[99] = 0, 0
	f := fitted(t, x, x, ivar, once)
	for _, c := range []struct{ x, want float64 }{{-1, x[1]}, {0, x[1]}, {1, x[98]}, {7, x[98]}} {
		if got := f.Value(c.x); math.Abs(got-c.want) > 1e-8 {
			t.Errorf("Value(%g) = %g, want %g", c.x, got, c.want)
		}
	}
}
