package continuum

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Across and beside a gap the continuum is right within its error, at any phase of the knots and any
// width of the gap up to eight knots, at high and low S/N: two in three
// values within Sigma, and none beyond five. Some more than that are within, as the truth
// bends less than the prior grants.
func TestGapsAreCrossed(t *testing.T) {
	const n, spacing = 2000, 0.025
	x := axis(n)
	r := rand.New(rand.NewPCG(5, 2))
	var f Fitter
	for _, noise := range []float64{0.05, 0.5, 5} {
		var inside, all, worst float64
		for _, width := range []float64{0.02, 0.05, 0.1, 0.2} {
			for range 100 {
				from := 0.3 + 0.2*r.Float64()
				flux, ivar := make([]float64, n), constant(n, 1/(noise*noise))
				slope, bend := -4+6*r.Float64(), 0.5*r.NormFloat64()
				truth := func(v float64) float64 { return 5 + slope*(v-0.5) + bend*(v-0.5)*(v-0.5) }
				for i, v := range x {
					flux[i] = truth(v) + noise*r.NormFloat64()
					if v > from && v < from+width {
						flux[i], ivar[i] = math.NaN(), 0
					}
				}
				if err := f.Fit(x, flux, ivar, Options{Spacing: spacing, Iterations: 3, ClipLow: 5, ClipHigh: 5, Bend: 0.02}); err != nil {
					t.Fatal(err)
				}
				f.Errors()
				for _, at := range []float64{from - 0.01, from, from + 0.3*width, from + 0.5*width, from + width, from + width + 0.01} {
					s := f.Sigma(at)
					pull := math.Abs(f.Value(at)-truth(at)) / s
					if all++; pull < 1 {
						inside++
					}
					worst = max(worst, pull)
				}
			}
		}
		t.Logf("noise %g: %.0f %% within Sigma, worst %.1f", noise, 100*inside/all, worst)
		if inside/all < 0.63 || inside/all > 0.85 || worst > 5 {
			t.Errorf("noise %g: %.0f %% within Sigma, worst %.1f of it", noise, 100*inside/all, worst)
		}
	}
}

// What is wrong beside a gap, such as the wing of a line that its mask has left, does not swing the
// spline across: it stays within the size of the fault. Without the prior it leaves by
// several times that.
func TestFaultsDoNotSwing(t *testing.T) {
	const n, spacing, wing = 2000, 0.025, 0.2
	x := axis(n)
	r := rand.New(rand.NewPCG(6, 2))
	swing := func(bend float64) float64 {
		most := 0.0
		for range 50 {
			from := 0.3 + 0.2*r.Float64()
			to := from + 2*spacing
			flux, ivar := make([]float64, n), constant(n, 1e4)
			for i, v := range x {
				flux[i] = 1 + 0.01*r.NormFloat64()
				if v < from {
					flux[i] += wing * math.Exp(-(from-v)/0.006)
				}
				if v > from && v < to {
					ivar[i] = 0
				}
			}
			f := fitted(t, x, flux, ivar, Options{Spacing: spacing, Iterations: 1, Bend: bend})
			for v := from; v < to; v += 0.002 {
				most = max(most, math.Abs(f.Value(v)-1))
			}
		}
		return most
	}
	free, bent := swing(0), swing(0.02)
	t.Logf("off by %.2f, without the prior by %.2f", bent, free)
	if bent > wing || free < 2*wing {
		t.Errorf("off by %.2f, without the prior by %.2f; the fault is %.2f", bent, free, wing)
	}
}

// Where intervals are full the prior changes nothing.
func TestBendLeavesDataAlone(t *testing.T) {
	const n = 1000
	x := axis(n)
	r := rand.New(rand.NewPCG(7, 2))
	flux, ivar := make([]float64, n), constant(n, 1)
	for i, v := range x {
		flux[i] = math.Sin(20*v) + r.NormFloat64()
		if i%10 == 3 {
			ivar[i] = 0 // nine in ten
		}
	}
	a := fitted(t, x, flux, ivar, once)
	opt := once
	opt.Bend = 1e-6
	b := fitted(t, x, flux, ivar, opt)
	for _, v := range x {
		if a.Value(v) != b.Value(v) {
			t.Fatalf("at %g: %g without the prior, %g with it", v, a.Value(v), b.Value(v))
		}
	}
}

// Between counts what held the last fit: neither masked nor clipped points.
func TestBetween(t *testing.T) {
	const n = 200
	x, flux, ivar := axis(n), constant(n, 1), constant(n, 100)
	for i := 50; i < 100; i++ {
		ivar[i] = 0
	}
	flux[120] = 9
	f := fitted(t, x, flux, ivar, Options{Spacing: 0.2, ClipHigh: 5, Iterations: 5})
	for _, c := range []struct {
		from, to float64
		want     int
	}{{x[0], x[n-1], n - 51}, {x[40], x[60], 10}, {x[110], x[130], 20}, {x[60], x[80], 0}, {2, 3, 0}, {x[10], x[10], 1}} {
		if got := f.Between(c.from, c.to); got != c.want {
			t.Errorf("%d points in [%g, %g], want %d", got, c.from, c.to, c.want)
		}
	}
}
