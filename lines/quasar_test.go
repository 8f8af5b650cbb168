package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The broad lines of a synthetic quasar at z = 2.2, sigma 2,500 km/s, come back when all
// lines of the shipped list are fitted, each by its own ion: no neighbor in reach takes
// another's place. Doublets are added up, and C III] with Si III], which trade flux. Means of
// 60 spectra, whose standard error is 1 %, for N V 1.7 %: to 5 %, what a broad line's continuum is doubted by,
// N V beside Lyman-alpha to 10 %. The errors contain that doubt, while the continuum is exact
// here: values lie nearer to the truth than one of them.
func TestQuasarLines(t *testing.T) {
	m := fullMeter(t)
	lines := []struct {
		names []string
		most  float64
	}{
		{[]string{"Lya"}, 0.05}, {[]string{"CIV_1548", "CIV_1550"}, 0.05}, {[]string{"SiIII_1892", "CIII_1906", "CIII_1908"}, 0.05},
		{[]string{"MgII_2796", "MgII_2803"}, 0.05}, {[]string{"SiIV_1393", "SiIV_1402"}, 0.05}, {[]string{"NV_1238", "NV_1242"}, 0.1},
	}
	truths := map[string]float64{}
	for i := range m.lines {
		l := &m.lines[i]
		sigma, peak := quasarShape(l)
		truths[l.Name] = peak * math.Sqrt(2*math.Pi) * l.Wave * sigma / c
	}
	for _, sn := range []float64{8, 20} {
		clean := surveySpectrum(m, 2.2, 1e-9, quasarShape)
		for i := range clean.Ivar {
			clean.Ivar[i] = sn * sn
		}
		rng := rand.New(rand.NewPCG(7, 9))
		var a Arm
		var sc Scratch
		ratio, pull := make([]moments, len(lines)), make([]moments, len(lines))
		for range 60 {
			noisy(&a, clean, rng)
			found := map[string]Result{}
			for _, r := range m.Measure(nil, []Arm{a}, Options{Z: 2.2, Broad: true}, &sc) {
				found[r.Name] = r
			}
			for k, l := range lines {
				w, truth, err := 0.0, 0.0, 0.0
				for _, name := range l.names {
					r := found[name]
					w -= r.EWRest
					err = max(err, math.Hypot(r.EWRestErr, found[name+wingsSuffix].EWRestErr))
					if second, ok := found[name+wingsSuffix]; ok {
						w -= second.EWRest
					}
					truth += truths[name]
				}
				ratio[k].add(w / truth)
				pull[k].add((w - truth) / err)
			}
		}
		for k, l := range lines {
			t.Logf("S/N %g, %s: W %.3f +- %.3f of the truth, pulls %.2f +- %.2f", sn, l.names[0], ratio[k].mean(), ratio[k].sd(), pull[k].mean(), pull[k].sd())
			if math.Abs(ratio[k].mean()-1) > l.most || math.Hypot(pull[k].mean(), pull[k].sd()) > 1 {
				t.Errorf("S/N %g, %s: W %.3f of the truth, want 1 +- %g; pulls %.2f +- %.2f, want below 1", sn, l.names[0], ratio[k].mean(), l.most, pull[k].mean(), pull[k].sd())
			}
		}
	}
}

// Light under a broad line that does not stand above the doubt of the continuum, as iron's under
// Mg II, is no second component of it: a hump of 12 % of the continuum, sigma 5,000
// km/s, at S/N 60 a pixel. One of half the continuum is.
func TestSecondOfIron(t *testing.T) {
	m := parse(t, oneLine)
	for _, tc := range []struct {
		height float64
		want   int
	}{{0.12, 0}, {0.5, 40}} {
		clean := newArm(grid(5000, 69, 1201), 1, 1/60.0, profileTruth{5000, 1100 * 5000 / c, 1100 * 5000 / c * math.Sqrt(2*math.Pi)},
			profileTruth{5000, 5000 * 5000 / c, tc.height * 5000 * 5000 / c * math.Sqrt(2*math.Pi)})
		rng := rand.New(rand.NewPCG(11, 4))
		var a Arm
		var sc Scratch
		second := 0
		for range 40 {
			noisy(&a, clean, rng)
			if len(m.Measure(nil, []Arm{a}, Options{Broad: true}, &sc)) > 1 {
				second++
			}
		}
		if second != tc.want {
			t.Errorf("hump of %g: second component in %d of 40 spectra, want %d", tc.height, second, tc.want)
		}
	}
}
