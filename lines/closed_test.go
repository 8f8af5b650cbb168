package lines

import (
	"math"
	"strings"
	"testing"

	"duskline/hydrogen"
	"duskline/internal/checkvalues"
)

// near fails the test when got is not within tol of want.
func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s = %.8g, want %.8g +- %.2g", what, got, want, tol)
	}
}

// A Gaussian of depth d and standard deviation s has W = sqrt(2 pi) s d: the
// integral in closed form. Without noise, fit and sum must return it, with the
// continuum known and with a slope left free.
func TestGaussianClosedForm(t *testing.T) {
	m := parse(t, oneLine)
	for _, tc := range []struct{ depth, pixels, z, slack float64 }{
		{0.5, 3, 0, -1}, {0.5, 3, 0.7, 0}, {-4, 3, 0.7, 0}, {0.9, 1, 0, 0}, {0.3, 12, 1.5, 0}, {-0.2, 0.5, 0, 0},
	} {
		const step = 25.0
		mu := 5000 * (1 + tc.z) * (1 + 31/c)
		sigma := tc.pixels * step * 5000 * (1 + tc.z) / c
		flux := -tc.depth * math.Sqrt(2*math.Pi) * sigma
		a := newArm(grid(5000*(1+tc.z), step, 801), 1, 1e-3, profileTruth{mu, sigma, flux})
		r := m.Measure(nil, []Arm{a}, Options{Z: tc.z, ContinuumSlack: tc.slack}, nil)[0]
		w := -flux / (1 + tc.z)
		// The series for the pixel is good to 2e-4 of the peak at 0.8 pixels
		// and exact below; the last step leaves 1e-3 of an error at most.
		tol := 2e-4*math.Abs(w) + 2e-3*r.EWRestErr
		near(t, "fit", r.EWRest, w, tol)
		near(t, "sum", r.EWSum, w, tol)
		near(t, "offset", r.OffsetKms, 31, 0.02*r.OffsetErr)
		near(t, "width", r.WidthKms, tc.pixels*step, 0.2*r.WidthErr)
		near(t, "flux", r.Flux, flux, tol*(1+tc.z))
		near(t, "continuum", r.Continuum, 1, 1e-3)
		want := Absorption
		if tc.depth < 0 {
			want = Emission
		}
		if r.Kind != want || r.Blend != "" || r.Reason != "" {
			t.Errorf("%+v: kind %q blend %q reason %q", tc, r.Kind, r.Blend, r.Reason)
		}
	}
}

// The width is that of the source where the resolution is known: variances
// add. Two arms of different resolution must agree on it.
func TestIntrinsicWidthTwoArms(t *testing.T) {
	m := parse(t, oneLine)
	arm := func(r, step, shift float64) Arm {
		inst := c / r / fwhmPerSigma
		sigma := math.Hypot(90, inst) * 5000 / c
		a := newArm(grid(5000*(1+shift/c), step, 301), 2, 0.01, profileTruth{5000, sigma, 6})
		a.Resolution = []float64{r}
		return a
	}
	arms := []Arm{arm(2000, 60, 0), arm(5000, 25, 900)}
	for _, set := range [][]Arm{arms[:1], arms[1:], arms} {
		r := m.Measure(nil, set, Options{}, nil)[0]
		near(t, "width", r.WidthKms, 90, 0.02*r.WidthErr)
		near(t, "EW", r.EWRest, -3, 1e-3)
		near(t, "sum", r.EWSum, -3, 1e-3)
	}
	one := m.Measure(nil, arms[:1], Options{}, nil)[0]
	two := m.Measure(nil, arms, Options{}, nil)[0]
	if two.EWRestErr >= one.EWRestErr || two.EWSumErr >= one.EWSumErr || two.Pixels <= one.Pixels {
		t.Errorf("a second arm does not help: %v %v, %v %v", one.EWRestErr, two.EWRestErr, one.EWSumErr, two.EWSumErr)
	}
	// Unresolved: no broader than the instrument.
	a := newArm(grid(5000, 30, 301), 1, 0.01, profileTruth{5000, c / 2000 / fwhmPerSigma * 5000 / c * 0.9, 3})
	a.Resolution = []float64{2000}
	r := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
	near(t, "width of an unresolved line", r.WidthKms, 0, 0)
	if !(r.WidthErr > 0) {
		t.Errorf("no upper bound on the width of an unresolved line: %v", r.WidthErr)
	}
}

// The sum over a wide window of a Voigt line must return the equivalent width
// of the curve of growth. Source: testdata/cog_ew.csv, column of the profile in
// frequency within 10 % of the center.
func TestVoigtSum(t *testing.T) {
	rows := checkvalues.Rows(t, "testdata/cog_ew.csv")
	for _, row := range rows[1:] {
		lam0, f, gamma, b, logN := checkvalues.Number(t, row[1]), checkvalues.Number(t, row[2]), checkvalues.Number(t, row[3]), checkvalues.Number(t, row[4]), checkvalues.Number(t, row[5])
		want := checkvalues.Number(t, row[9])
		damp := gamma * lam0 * 1e-13 / (4 * math.Pi * b)
		tau0 := 1.49736415e-15 * math.Pow(10, logN) * f * lam0 / b
		// Steps of b/10; the profile is smooth, so sampling at pixel centers
		// converges faster than any power.
		step := b / 10
		n := 2*int(0.12*c/step) + 1
		wave := grid(lam0, step, n)
		a := Arm{Wave: wave, Flux: make([]float64, n), Ivar: make([]float64, n), Cont: make([]float64, n)}
		for i, w := range wave {
			u := c / b * (lam0/w - 1)
			a.Flux[i] = math.Exp(-tau0 * hydrogen.Voigt(damp, u))
			a.Ivar[i], a.Cont[i] = 1e6, 1
		}
		got, _, covered := Sum(&a, 0.9*lam0, 1.1*lam0, 0)
		near(t, row[0]+" "+row[5], got, want, 3e-4*want)
		near(t, "covered", covered, 1, 1e-9)
	}
}

// Balmer lines of Vega between stated windows and sidebands. Source:
// testdata/vega_ew.csv. The tolerance of 0.5 % covers how pixels at the edges
// of window and sidebands are counted.
func TestVega(t *testing.T) {
	var a Arm
	for _, row := range checkvalues.Rows(t, "testdata/vega_calspec_excerpt.csv") {
		a.Wave = append(a.Wave, checkvalues.Number(t, row[0]))
		a.Flux = append(a.Flux, checkvalues.Number(t, row[1]))
		a.Ivar = append(a.Ivar, 1e24)
	}
	a.Cont = make([]float64, len(a.Wave))
	side := func(band string) (wave, flux float64) {
		lo, hi, _ := strings.Cut(band, "-")
		n := 0.0
		for i, w := range a.Wave {
			if w >= checkvalues.Number(t, lo) && w <= checkvalues.Number(t, hi) {
				wave += w
				flux += a.Flux[i]
				n++
			}
		}
		return wave / n, flux / n
	}
	for _, row := range checkvalues.Rows(t, "testdata/vega_ew.csv")[1:] {
		w1, f1 := side(row[3])
		w2, f2 := side(row[4])
		for i, w := range a.Wave {
			a.Cont[i] = f1 + (f2-f1)*(w-w1)/(w2-w1)
		}
		mid, half, want := checkvalues.Number(t, row[1]), checkvalues.Number(t, row[2]), checkvalues.Number(t, row[6])
		got, _, _ := Sum(&a, mid-half, mid+half, 0)
		near(t, row[0]+" +-"+row[2], got, want, 0.005*want)
	}
}
