package lines

import (
	"math/rand/v2"
	"testing"
)

// A faint line takes its width from a strong one as far as its own pixels do not
// tell: it is measured with a smaller error, and the error holds. A line of another
// width keeps it. 500 spectra: the standard error of a mean is 4.5 %, of a
// deviation 3.2 %.
func TestKin(t *testing.T) {
	const far = "[[line]]\nname = \"B\"\nion = \"Y I\"\nwave = 5300.0\nseen = \"emission\"\nsource = \"invented\"\n"
	both, alone := parse(t, oneLine+far), parse(t, far)
	for _, tc := range []struct{ sigma, flux, most, mean float64 }{
		{120, 2.6, 0.99, 0.2}, // 7 sigma
		// 20 sigma, 2.5 times as wide: the prior is wrong by 2.6 of its errors and
		// moves the value by 0.4 of its own.
		{300, 12, 1.02, 0.5},
	} {
		scale := 5300 / c
		clean := newArm(grid(5150, 69, 601), 1, 0.1, profileTruth{5000, 120 * 5000 / c, 20}, profileTruth{5300, tc.sigma * scale, tc.flux})
		rng := rand.New(rand.NewPCG(23, 1))
		var a Arm
		var sc Scratch
		var pull, err, errAlone moments
		for range 500 {
			noisy(&a, clean, rng)
			res := both.Measure(nil, []Arm{a}, Options{}, &sc)
			pull.add((res[1].EWRest + tc.flux) / res[1].EWRestErr)
			err.add(res[1].EWRestErr)
			errAlone.add(alone.Measure(nil, []Arm{a}, Options{}, &sc)[0].EWRestErr)
		}
		t.Logf("sigma %g: pulls %.3f +- %.3f, error %.3f, without the other line %.3f", tc.sigma, pull.mean(), pull.sd(), err.mean(), errAlone.mean())
		if !(err.mean() < tc.most*errAlone.mean()) {
			t.Errorf("sigma %g: error %.3f, without the other line %.3f", tc.sigma, err.mean(), errAlone.mean())
		}
		checkPull(t, "equivalent width", &pull, around(0.88, 1.12, tc.mean, 0.1))
	}
}
