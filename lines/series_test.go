package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// A faint line of hydrogen in an active galaxy takes its width from hydrogen, narrow
// here, and not from the broad line of another ion; without hydrogen from that one.
// Its equivalent width is then right: in the mean of 200 spectra to 0.3 of its error, the
// standard error of that mean being 0.07.
func TestSeries(t *testing.T) {
	const others = `
[[line]]
name = "Wide"
ion = "X II"
wave = 4000.0
seen = "both"
source = "invented"

[[line]]
name = "First"
ion = "H I"
wave = 5000.0
seen = "both"
source = "invented"

[[line]]
name = "Second"
ion = "H I"
wave = 4500.0
seen = "both"
source = "invented"
`
	const narrow, wide = 200.0, 2500.0
	m := parse(t, others)
	for _, strong := range []float64{20, 0} {
		clean := newArm(grid(4500, 69, 1401), 1, 0.1, profileTruth{4000, wide * 4000 / c, 200},
			profileTruth{5000, narrow * 5000 / c, strong}, profileTruth{4500, narrow * 4500 / c, 0.8})
		rng := rand.New(rand.NewPCG(5, 9))
		var a Arm
		var sc Scratch
		var pull moments
		want, borrowed := narrow, 0.0
		if strong == 0 {
			want = wide
		}
		for range 200 {
			noisy(&a, clean, rng)
			r := m.Measure(nil, []Arm{a}, Options{Broad: true}, &sc)[1] // in order of wavelength
			if math.IsNaN(r.WidthErr) && math.Abs(r.WidthKms/want-1) < 0.2 {
				borrowed++
				pull.add((r.EWRest + 0.8) / r.EWRestErr)
			}
		}
		t.Logf("strong %g: width taken over in %.0f of 200 spectra, mean pull %.2f", strong, borrowed, pull.mean())
		if borrowed < 150 {
			t.Errorf("strong %g: width of %g km/s taken over in %.0f of 200 spectra, want 150", strong, want, borrowed)
		}
		if strong > 0 && math.Abs(pull.mean()) > 0.3 {
			t.Errorf("mean pull %.2f, want 0 +- 0.3", pull.mean())
		}
	}
}
