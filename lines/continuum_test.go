package lines

import (
	"math"
	"testing"
)

// A continuum that is 4 % off and tilted by 3 % across 100 Angstrom must not
// reach the equivalent width, narrow or wide line; held fixed it does. The
// prior of 5 % holds back a little of the tilt, less than a third of the error.
func TestContinuumMisfit(t *testing.T) {
	m := parse(t, oneLine)
	for _, pixels := range []float64{2, 10, 40} {
		const step = 25.0
		sigma := pixels * step * 5000 / c
		w := 0.5 * math.Sqrt(2*math.Pi) * sigma
		a := newArm(grid(5000, step, 1601), 1, 0.02, profileTruth{5000, sigma, -w})
		for i, l := range a.Wave {
			a.Cont[i] = 1.04 + 0.03*(l-5000)/100
		}
		r := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
		near(t, "fit", r.EWRest, w, 0.3*r.EWRestErr)
		near(t, "sum", r.EWSum, w, 0.3*r.EWSumErr)
		near(t, "continuum", r.Continuum, 1, 0.005)
		fixed := m.Measure(nil, []Arm{a}, Options{ContinuumSlack: -1}, nil)[0]
		if math.Abs(fixed.EWSum-w) < 1.5*fixed.EWSumErr {
			t.Errorf("%g pixels: a wrong continuum held fixed does no harm: %v +- %v for %v", pixels, fixed.EWSum, fixed.EWSumErr, w)
		}
	}
}
