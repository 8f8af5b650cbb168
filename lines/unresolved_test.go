package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// Two lines 1.8 and 1 sigma apart are one sum: one row has the light of both, the other says
// blended. A strong line of the same ion elsewhere tells offset and width: then both
// are measured, if they are more than the 1.2 sigma apart that a shared amplitude needs.
func TestUnresolved(t *testing.T) {
	const sigmaKms, third = 80.0, `
[[line]]
name = "C"
ion = "X I"
wave = 5100.0
group = "AB"
seen = "both"
source = "invented"
`
	for _, tc := range []struct {
		apart  float64
		helped bool
		least  float64 // share of 200 spectra in which a sum is reported
		most   float64
	}{
		{1.8, false, 0.95, 1}, {1, false, 0.95, 1}, {1.8, true, 0, 0.05}, {4, false, 0, 0},
	} {
		wave := 5000 * (1 + tc.apart*sigmaKms/c)
		text := fmt.Sprintf(pair, "X I", wave)
		sigma := 5000 * sigmaKms / c
		const flux = 4.0
		truth := []profileTruth{{5000, sigma, flux}, {wave, sigma, flux / 2}}
		if tc.helped {
			text += third
			truth = append(truth, profileTruth{5100, sigma, 20 * flux})
		}
		m := parse(t, text)
		clean := newArm(grid(5000, 20, 1201), 1, 0.25, truth...)
		rng := rand.New(rand.NewPCG(31, 14))
		var a Arm
		var sc Scratch
		sums := 0.0
		var first moments
		for range 200 {
			noisy(&a, clean, rng)
			res := m.Measure(nil, []Arm{a}, Options{}, &sc)
			carrier, other := res[0], res[1]
			if carrier.Reason != ReasonSum {
				first.add((res[0].EWRest + flux) / res[0].EWRestErr)
				continue
			}
			sums++
			if other.Reason != ReasonBlended || other.Kind != Unmeasured || !math.IsNaN(other.EWRest) || carrier.Blend != "A+B" || other.Blend != "A+B" {
				t.Fatalf("a sum %+v\nwith %+v", carrier, other)
			}
			if carrier.Kind != Emission || !math.IsNaN(carrier.OffsetErr) || !math.IsNaN(carrier.WidthErr) || math.Abs(carrier.EWRest+1.5*flux) > 5*carrier.EWRestErr {
				t.Fatalf("a sum %+v", carrier)
			}
		}
		if s := sums / 200; s < tc.least || s > tc.most {
			t.Errorf("%g sigma apart, helped %v: a sum in %.3f of the spectra, want %g to %g", tc.apart, tc.helped, s, tc.least, tc.most)
		}
		// Standard errors of 200 pulls: 7 % of the mean, 5 % of the deviation; four of them.
		if tc.least == 0 && (math.Abs(first.mean()) > 0.28 || first.sd() < 0.8 || first.sd() > 1.2) {
			t.Errorf("%g sigma apart, helped %v: pulls %.2f +- %.2f", tc.apart, tc.helped, first.mean(), first.sd())
		}
	}
}

// A fit must not put one of two close lines into the place of the other, or into the
// middle of both: it would be wrong by 20 errors. 7 is more than the tail of 300
// pulls of a skew distribution.
func TestNotInTheOthersPlace(t *testing.T) {
	for _, tc := range []struct{ apart, ratio, noise float64 }{
		{1.8, 1, 0.02}, {1.5, 3, 0.02}, {2.2, 3, 0.05}, {2.6, 0.1, 0.05},
	} {
		const sigmaKms = 80.0
		sigma := 5000 * sigmaKms / c
		flux := -0.6 / max(1, tc.ratio) * math.Sqrt(2*math.Pi) * sigma
		wave := 5000 * (1 + tc.apart*sigmaKms/c)
		m := parse(t, fmt.Sprintf(pair, "X I", wave))
		clean := newArm(grid(5000, 20, 1201), 1, tc.noise, profileTruth{5000, sigma, flux}, profileTruth{wave, sigma, tc.ratio * flux})
		rng := rand.New(rand.NewPCG(1, 2))
		var a Arm
		var sc Scratch
		wrong := 0
		for range 300 {
			noisy(&a, clean, rng)
			res := m.Measure(nil, []Arm{a}, Options{}, &sc)
			if res[0].Reason == "" && math.Abs(res[0].EWRest+flux) > 7*res[0].EWRestErr {
				wrong++
			}
		}
		if wrong > 0 {
			t.Errorf("%+v: in %d of 300 spectra the first line is wrong by more than 7 errors", tc, wrong)
		}
	}
}
