package continuum

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Sigma is the scatter of fits to fresh noise. With 600 fits a scatter is known
// to 1/sqrt(1200), 2.9 %; five of these for each of the seven points looked
// at, and 3 % for the scatter of the residuals, which scales Sigma, is at least
// one and is known to 2 % from a thousand points.
func TestSigmaAgainstMonteCarlo(t *testing.T) {
	const n, fits = 1000, 600
	r := rand.New(rand.NewPCG(11, 2))
	x, ivar := axis(n), make([]float64, n)
	for i, v := range x {
		sigma := 0.5 + v
		ivar[i] = 1 / (sigma * sigma)
		if v > 0.6 && v < 0.65 {
			ivar[i] = 0
		}
	}
	at := []float64{0, 0.02, 0.25, 0.5, 0.62, 0.8, 1}
	sum, square, said := make([]float64, len(at)), make([]float64, len(at)), make([]float64, len(at))
	flux := make([]float64, n)
	var f Fitter
	for range fits {
		for i := range flux {
			flux[i] = 0
			if ivar[i] > 0 {
				flux[i] = r.NormFloat64() / math.Sqrt(ivar[i])
			}
		}
		if err := f.Fit(x, flux, ivar, once); err != nil {
			t.Fatal(err)
		}
		f.Errors()
		for k, v := range at {
			y := f.Value(v)
			sum[k] += y
			square[k] += y * y
			said[k] += f.Sigma(v) / fits
		}
	}
	for k, v := range at {
		mean := sum[k] / fits
		scatter := math.Sqrt(square[k]/fits - mean*mean)
		if ratio := said[k] / scatter; math.Abs(ratio-1) > 5*0.029+0.03 {
			t.Errorf("at %g: Sigma says %.4f, fits scatter by %.4f", v, said[k], scatter)
		}
		if math.Abs(mean) > 5*scatter/math.Sqrt(fits) {
			t.Errorf("at %g: biased by %.4f with a scatter of %.4f", v, mean, scatter)
		}
	}
}

// Scatter says by how much the errors are too small, and widens Sigma.
func TestScatter(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 9))
	const n = 4000
	flux := make([]float64, n)
	for i := range flux {
		flux[i] = r.NormFloat64()
	}
	for _, c := range []struct{ ivar, want float64 }{{1, 1}, {9, 3}, {0.01, 1}} {
		f := fitted(t, axis(n), flux, constant(n, c.ivar), once)
		// 1.4826 MAD of 4,000 Gaussian deviates scatters by 1.17/sqrt(2 n),
		// 1.3 % (Rousseeuw & Croux 1993, efficiency 37 %); four of these.
		if math.Abs(f.Scatter()/c.want-1) > 0.052 {
			t.Errorf("inverse variance %g of unit noise: scatter %.3f, want %.3f", c.ivar, f.Scatter(), c.want)
		}
		f.Errors()
		wide := f.Sigma(0.5)
		// Errors three times too small must not make the continuum three
		// times too certain.
		if c.ivar == 9 && math.Abs(wide/fitted9(t, flux)-1) > 0.06 {
			t.Errorf("Sigma %.5f from errors too small by three", wide)
		}
	}
}

// fitted9 is Sigma at 0.5 with true errors.
func fitted9(t *testing.T, flux []float64) float64 {
	f := fitted(t, axis(len(flux)), flux, constant(len(flux), 1), once)
	f.Errors()
	return f.Sigma(0.5)
}

// A fitter gives the same whatever it fitted before.
func TestFitterReuse(t *testing.T) {
	x, flux, ivar := rough()
	opt := Options{Spacing: 0.0251, ClipLow: 2, ClipHigh: 3, Iterations: 6, Grow: 1}
	fresh := fitted(t, x, flux, ivar, opt)
	used := fitted(t, axis(5000), constant(5000, 4), constant(5000, 1), Options{Spacing: 0.01, Iterations: 3, ClipLow: 0.1, ClipHigh: 0.1})
	if err := used.Fit(x[:9], flux[:9], ivar[:9], opt); err != nil {
		t.Fatal(err)
	}
	if err := used.Fit(x, flux, ivar, opt); err != nil {
		t.Fatal(err)
	}
	for _, v := range x {
		if fresh.Value(v) != used.Value(v) {
			t.Fatalf("at %g: %v fresh, %v used", v, fresh.Value(v), used.Value(v))
		}
	}
	if fresh.Clipped() != used.Clipped() || fresh.Scatter() != used.Scatter() {
		t.Error("clipping differs between a fresh and a used fitter")
	}
}

func TestFitAllocatesNothing(t *testing.T) {
	x, flux, ivar := rough()
	opt := Options{Spacing: 0.0251, ClipLow: 2.5, ClipHigh: 3.5, Iterations: 6}
	f := fitted(t, x, flux, ivar, opt)
	f.Errors()
	sum := 0.0
	if n := testing.AllocsPerRun(5, func() {
		if f.Fit(x, flux, ivar, opt) != nil {
			panic("a fit that went well before failed")
		}
		f.Errors()
		sum += f.Value(x[9]) + f.Sigma(x[9])
	}); n != 0 {
		t.Errorf("%g allocations a fit once the buffers are there", n)
	}
}

func BenchmarkFit(b *testing.B) {
	x, flux, ivar := rough()
	opt := Options{Spacing: 0.0251, ClipLow: 2.5, ClipHigh: 3.5, Iterations: 6}
	var f Fitter
	b.ReportAllocs()
	for b.Loop() {
		if err := f.Fit(x, flux, ivar, opt); err != nil {
			b.Fatal(err)
		}
	}
}
