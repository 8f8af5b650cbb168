package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// C III] of 20 Angstrom stands beside Si III] of 5 and Al III of 3, sigma 2,550 km/s. C III] is
// in emission at any S/N, and its light and that of Si III] add up, in one row or in several, to 5 %, with
// that of Al III where that is in the sum. Sums lie nearer to the truth than one
// standard error: errors have the doubt of a continuum that is exact here.
func TestBroadSum(t *testing.T) {
	m := fullMeter(t)
	widths := map[string]float64{"CIV_1548": 18, "CIV_1550": 18, "CIII_1908": 20, "SiIII_1892": 5, "AlIII_1854": 2, "AlIII_1862": 1}
	shape := func(l *line) (sigmaKms, peak float64) {
		if w := widths[l.Name]; w > 0 {
			return 2550, w / (math.Sqrt(2*math.Pi) * l.Wave * 2550 / c)
		}
		return 0, 0
	}
	for _, tc := range []struct{ sn, least float64 }{{5, 0.95}, {10, 1}, {20, 1}, {40, 1}, {100, 1}} {
		clean := surveySpectrum(m, 1.8, 1e-9, shape)
		for i := range clean.Ivar {
			clean.Ivar[i] = tc.sn * tc.sn
		}
		rng := rand.New(rand.NewPCG(19, 8))
		var a Arm
		var sc Scratch
		var pull, ratio moments
		seen := 0.0
		const n = 60
		for range n {
			noisy(&a, clean, rng)
			found := map[string]Result{}
			for _, r := range m.Measure(nil, []Arm{a}, Options{Z: 1.8, Broad: true}, &sc) {
				found[r.Name] = r
			}
			r := found["CIII_1908"]
			if r.Kind != Emission {
				continue
			}
			seen++
			light, truth := 0.0, 25.0
			for _, name := range []string{"CIII_1906", "CIII_1908", "SiIII_1892"} {
				if w := found[name].EWRest; !math.IsNaN(w) {
					light -= w
				}
			}
			if found["AlIII_1854"].Reason == ReasonBlended {
				truth = 28
			}
			ratio.add(light / truth)
			if s := found["SiIII_1892"]; r.Reason == ReasonSum && s.Reason == ReasonBlended {
				pull.add((light - truth) / r.EWRestErr)
				if !math.IsNaN(r.OffsetErr) || !math.IsNaN(s.EWRest) || s.Blend == "" {
					t.Fatalf("S/N %g: a sum %+v\nwith %+v", tc.sn, r, s)
				}
			}
		}
		t.Logf("S/N %g: C III] seen in %.0f of %d, light %.3f +- %.3f of the truth; %.0f sums, pulls %.2f +- %.2f", tc.sn, seen, n, ratio.mean(), ratio.sd(), pull.n, pull.mean(), pull.sd())
		if seen < tc.least*n {
			t.Errorf("S/N %g: C III] is in emission in %.0f of %d spectra, want %.0f %%", tc.sn, seen, n, 100*tc.least)
		}
		if math.Abs(ratio.mean()-1) > 0.05 {
			t.Errorf("S/N %g: light %.3f of the truth, want 1 +- 0.05", tc.sn, ratio.mean())
		}
		if pull.n < 5 || math.Hypot(pull.mean(), pull.sd()) > 1 {
			t.Errorf("S/N %g: %.0f sums, pulls %.2f +- %.2f, want 5 and below 1", tc.sn, pull.n, pull.mean(), pull.sd())
		}
	}
}

// Lyman-alpha with a core and wings, the flux of the blue side halved by the forest, keeps its
// wings from N V: that stays within 2,000 km/s of it, and Lyman-alpha is seen.
func TestWingsOfLyman(t *testing.T) {
	m := fullMeter(t)
	const z = 2.9
	for _, sn := range []float64{5, 20, 40, 80} {
		clean := surveySpectrum(m, z, 1e-9, func(l *line) (sigmaKms, peak float64) {
			w := map[string]float64{"CIV_1548": 18, "CIV_1550": 18, "Lya": 30, "NV_1238": 5, "NV_1242": 3}[l.Name]
			s := 2300.0
			if l.Name == "Lya" {
				s = 740
			}
			return s, w / (math.Sqrt(2*math.Pi) * l.Wave * s / c)
		})
		wing := newArm(clean.Wave, 0, 1, profileTruth{1215.67 * (1 + z), 1215.67 * (1 + z) * 5000 / c, 60 * (1 + z)})
		for i, w := range clean.Wave {
			clean.Flux[i] += wing.Flux[i]
			if w < 1215.67*(1+z) {
				clean.Flux[i] *= 0.75
				clean.Cont[i] = 0.75
			}
			clean.Ivar[i] = sn * sn
		}
		rng := rand.New(rand.NewPCG(12, 16))
		var a Arm
		var sc Scratch
		lost, far := 0, 0
		const n = 40
		for range n {
			noisy(&a, clean, rng)
			var lya, nv Result
			for _, r := range m.Measure(nil, []Arm{a}, Options{Z: z, Broad: true}, &sc) {
				switch r.Name {
				case "Lya":
					lya = r
				case "NV_1238":
					nv = r
				}
			}
			if lya.Kind != Emission {
				lost++
			}
			if nv.Kind == Emission && math.Abs(nv.OffsetKms-lya.OffsetKms) > strayFrom*broadOffset {
				far++
			}
		}
		t.Logf("S/N %g: Lyman-alpha lost in %d, N V astray in %d of %d", sn, lost, far, n)
		if lost > 0 || far > n/20 {
			t.Errorf("S/N %g: Lyman-alpha lost in %d, N V astray in %d of %d, want none and 5 %%", sn, lost, far, n)
		}
	}
}
