package lines

import (
	"math/rand/v2"
	"testing"
)

const hBeta = "[[hydrogen]]\nname = \"Hb\"\nlower = 2\nupper = 4\nseen = \"both\"\n"

// Nebular emission in a stellar absorption line. Where noise lets the data tell
// the two apart, both come back with errors that hold; elsewhere the assumed
// absorption keeps the emission within its error. Equivalent widths in Angstrom,
// sigma 130 and 550 km/s, pixels of 69 km/s. 500 trials: the standard error of a
// mean is 4.5 %, of a standard deviation 3.2 %.
func TestEmissionInAbsorption(t *testing.T) {
	m := parse(t, hBeta)
	wave := m.lines[0].Wave
	scale := wave / c
	const n = 500
	for _, tc := range []struct {
		sn, emission, absorption float64
		least, most              float64 // share in which two components are found
		mean                     float64 // of the pulls of the emission found alone
	}{
		{60, -5, 5, 0.98, 1, 0},
		{100, -3, 2, 0.9, 1, 0},
		{20, -5, 5, 0, 0.1, 0.7},
		{10, -5, 5, 0, 0.02, 0.7},
		{30, -5, 0, 0, 0.02, 1},
	} {
		clean := newArm(grid(wave, 69, 161), 1, 1/tc.sn,
			profileTruth{wave, 130 * scale, -tc.emission}, profileTruth{wave, 550 * scale, -tc.absorption})
		rng := rand.New(rand.NewPCG(11, uint64(tc.sn)))
		var a Arm
		var sc Scratch
		var res []Result
		var em, ab, one moments
		for range n {
			noisy(&a, clean, rng)
			res = m.Measure(res[:0], []Arm{a}, Options{}, &sc)
			if len(res) == 1 {
				one.add((res[0].EWRest - tc.emission) / res[0].EWRestErr)
				continue
			}
			if res[1].Name != "Hb_broad" || res[0].Blend != "Hb+Hb_broad" {
				t.Fatalf("%+v", res)
			}
			em.add((res[0].EWRest - tc.emission) / res[0].EWRestErr)
			ab.add((res[1].EWRest - tc.absorption) / res[1].EWRestErr)
		}
		t.Logf("S/N %g, W %g in %g: two in %.3f; emission %.3f +- %.3f, absorption %.3f +- %.3f, one %.2f +- %.2f", tc.sn, tc.emission,
			tc.absorption, em.n/n, em.mean(), em.sd(), ab.mean(), ab.sd(), one.mean(), one.sd())
		if em.n < tc.least*n || em.n > tc.most*n {
			t.Errorf("two components in %.3f of the spectra, want %g to %g", em.n/n, tc.least, tc.most)
		}
		if tc.least > 0.5 {
			// Selection by significance and the criterion shift the mean.
			b := around(0.85, 1.15, 0.3, 0.08)
			checkPull(t, "emission", &em, b)
			checkPull(t, "absorption", &ab, b)
		} else {
			// The prior of the absorption is wide: its error is not used up.
			if v, sd := one.mean(), one.sd(); !(v > -tc.mean && v < tc.mean) || sd > 1.15 {
				t.Errorf("emission alone: pulls %.3f +- %.3f, want 0 +- %.2f", v, sd, tc.mean)
			}
		}
	}
}

// A bright line that is one Gaussian stays one; wings of an outflow are told
// from it when they are there.
func TestWings(t *testing.T) {
	m := parse(t, oneLine)
	scale := 5000 / c
	for _, wings := range []float64{0, 6} {
		clean := newArm(grid(5000, 69, 161), 1, 0.02, profileTruth{5000, 130 * scale, 20}, profileTruth{5000 * (1 - 150/c), 500 * scale, wings})
		rng := rand.New(rand.NewPCG(13, 1))
		var a Arm
		var sc Scratch
		var slim, broad moments
		two := 0
		for range 400 {
			noisy(&a, clean, rng)
			res := m.Measure(nil, []Arm{a}, Options{}, &sc)
			if len(res) == 2 {
				two++
				slim.add((res[0].EWRest + 20) / res[0].EWRestErr)
				broad.add((res[1].EWRest + wings) / res[1].EWRestErr)
			}
		}
		switch {
		case wings == 0 && two > 2: // 1 in 1,000 by the chi^2 of three parameters at 30
			t.Errorf("wings found in %d of 400 Gaussian lines", two)
		case wings > 0 && two < 390:
			t.Errorf("wings found in %d of 400 lines that have them", two)
		case wings > 0:
			// Standard error of the deviation 3.5 %.
			checkPull(t, "line", &slim, around(0.88, 1.12, 0.25, 0.08))
			checkPull(t, "wings", &broad, around(0.88, 1.12, 0.25, 0.08))
		}
	}
}
