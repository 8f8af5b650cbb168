package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// A bump of He II and N III, sigma 1,300 km/s each and wider together than a line may be, has a
// narrow He II line on it. 11,000 km/s away stands a strong narrow line that wide bins of the bump
// reach. He II is seen at any S/N: the strong line is in none of the bins.
func TestBumpBesideStrongLine(t *testing.T) {
	m := fullMeter(t)
	for _, sn := range []float64{20, 40, 80} {
		clean := surveySpectrum(m, 0.05, 1e-9, func(l *line) (sigmaKms, peak float64) {
			w := map[string]float64{"Ha": 350, "Hb": 120, "OIII_5007": 600, "OIII_4959": 201, "HeII_4686": 1.2}[l.Name]
			const s = 80.0
			return s, w / (math.Sqrt(2*math.Pi) * l.Wave * s / c)
		})
		bump := newArm(clean.Wave, 0, 1, profileTruth{4687 * 1.05, 4687 * 1.05 * 1300 / c, 10 * 1.05}, profileTruth{4646 * 1.05, 4646 * 1.05 * 1300 / c, 5 * 1.05})
		for i := range clean.Ivar {
			clean.Flux[i] += bump.Flux[i]
			clean.Ivar[i] = sn * sn
		}
		rng := rand.New(rand.NewPCG(46, 86))
		var a Arm
		var sc Scratch
		seen := 0
		const n = 30
		for range n {
			noisy(&a, clean, rng)
			for _, r := range m.Measure(nil, []Arm{a}, Options{Z: 0.05}, &sc) {
				if r.Name == "HeII_4686" && r.Kind == Emission {
					seen++
				}
			}
		}
		t.Logf("S/N %g: seen in %d of %d", sn, seen, n)
		if seen < 25 { // 27 to 30 are measured, less about the root of the 3 that are not
			t.Errorf("S/N %g: He II seen in %d of %d, want 25", sn, seen, n)
		}
	}
}
