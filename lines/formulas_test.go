package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The line of the checks: sigma 4 Angstrom (FWHM 9.42), depth 0.6, pixels of
// 0.5 Angstrom, S/N 50 a pixel. Source of the numbers: computed with numpy and
// by Monte Carlo for the same line.
func checkLine(window float64) Arm {
	n := int(window/0.5) + 1
	wave := make([]float64, n)
	for i := range wave {
		wave[i] = 5000 + 0.5*float64(i-n/2)
	}
	return newArm(wave, 1, 0.02, profileTruth{5000, 4, -0.6 * math.Sqrt(2*math.Pi) * 4})
}

// Cayrel (1988, from memory): sigma_W = 1.5 sqrt(FWHM dx) / (S/N) for a Gaussian
// of three free parameters on a known continuum; 1.503 with all digits. The
// formula takes pixels as infinitely fine, which 8 of them a sigma make good to
// 1 %.
func TestCayrel(t *testing.T) {
	a := checkLine(400)
	m := parse(t, oneLine)
	opt := Options{ContinuumSlack: -1}
	r := m.Measure(nil, []Arm{a}, opt, nil)[0]
	near(t, "error of the fit", r.EWRestErr, 0.0651, 0.0013)
	near(t, "formula", r.EWRestErr, 1.503*math.Sqrt(fwhmPerSigma*4*0.5)/50, 0.0007)
	// The centroid's error, sqrt(2 sigma dx / sqrt(pi)) / (depth S/N) = 0.0501.
	near(t, "error of the center", r.OffsetErr/c*5000, 0.0501, 0.0005)
	// The scatter: 0.0675 +- 0.0017 in the source's Monte Carlo; here with a
	// standard error of 1.6 %.
	var got moments
	var b Arm
	var sc Scratch
	rng := rand.New(rand.NewPCG(1988, 1))
	for range 2000 {
		noisy(&b, a, rng)
		got.add(m.Measure(nil, []Arm{b}, opt, &sc)[0].EWRest)
	}
	near(t, "scatter", got.sd(), 0.0651, 0.0035)
	// A continuum that must be found in the same window costs more.
	free := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
	if !(free.EWRestErr > 1.02*r.EWRestErr) {
		t.Errorf("a free continuum does not widen the error: %v, %v", free.EWRestErr, r.EWRestErr)
	}
}

// Known continuum: sigma_W = dx sqrt(M) / (S/N), 0.0900 for 81 pixels.
func TestSumError(t *testing.T) {
	a := checkLine(400)
	ew, err, _ := Sum(&a, 5000-20.25, 5000+20.25, 0)
	near(t, "error of the sum", err, 0.5*math.Sqrt(81)/50, 1e-12)
	near(t, "error of the sum, printed", err, 0.0900, 5e-5)
	// All but 4e-7 of the Gaussian lies within 5 sigma.
	near(t, "sum", ew, 6.016, 1e-3)

	// Vollmann & Eversberg (2006, from memory): sqrt(1 + Fc/F) (dlambda - W) /
	// (S/N), F the mean in the window. With the S/N of one pixel it gives 1.017,
	// eleven times too much; it means that of the window's mean. It also takes
	// the continuum as known as well as the flux, and the noise as that of the
	// mean flux, where ours is the same in all pixels: hence 6 %.
	const pixels = 81.0
	mean := 1 - ew/40.5
	formula := math.Sqrt(1+1/mean) * (40.5 - ew) / 50
	near(t, "formula with the S/N of a pixel", formula, 1.017, 1e-3)
	a.ContErr = make([]float64, len(a.Wave))
	for i := range a.ContErr {
		a.ContErr[i] = 1 / (50 * math.Sqrt(pixels))
	}
	_, err, _ = Sum(&a, 5000-20.25, 5000+20.25, 0)
	near(t, "error with continuum error", err, formula/math.Sqrt(pixels), 0.06*formula/math.Sqrt(pixels))
}

// Pixels count with the part inside the window, wherever its edges fall.
func TestSumFractions(t *testing.T) {
	a := checkLine(100)
	for i := range a.Flux {
		a.Flux[i] = 0.75
	}
	for _, shift := range []float64{0, 0.1, 0.25, 0.37} {
		ew, _, covered := Sum(&a, 4990+shift, 5003.3+2*shift, 0.25)
		near(t, "sum", ew, 0.25*(13.3+shift)/1.25, 1e-9)
		near(t, "covered", covered, 1, 1e-9)
	}
	// Off the edge, and over a masked pixel, the part without pixels is told.
	a.Ivar[100] = 0
	_, _, covered := Sum(&a, a.Wave[100]-5, a.Wave[100]+5, 0)
	near(t, "covered beside a masked pixel", covered, 0.95, 1e-9)
	if ew, err, covered := Sum(&a, 9000, 9010, 0); !math.IsNaN(ew) || !math.IsNaN(err) || covered != 0 {
		t.Errorf("outside the coverage: %v %v %v", ew, err, covered)
	}
}
