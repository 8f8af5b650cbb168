package absorbers

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/hydrogen"
)

// A Lyman-limit system in front of a quasar at 3.6 shows by its break: where it
// is thin enough its column comes out, where not a lower limit; without one, no
// break is made up in more than one of twelve sightlines.
func TestLymanLimit(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	for _, logN := range []float64{0, 17.3, 18.5} {
		found, right := 0, 0
		const n = 12
		for k := range uint64(n) {
			r := rand.New(rand.NewPCG(21, k))
			// Quasars of makeQuasar lie below 3.6; this one is moved there.
			q := makeQuasarAt(r, 3.58, 15)
			const z = 3.35
			for i, w := range q.arm.Wave {
				d := math.Exp(-math.Pow(10, logN) * hydrogen.LymanLimitCrossSection(w/(1+z)))
				// The noise was made for the undimmed light: an upper bound.
				q.arm.Flux[i] *= d
				if d < 1 {
					q.arm.Flux[i] += 0.03 * r.NormFloat64()
					q.arm.Ivar[i] = 1 / (d*d/q.arm.Ivar[i] + 0.03*0.03)
				}
			}
			for _, s := range f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc) {
				if s.Kind != Hydrogen || s.Flags&BreakOnly == 0 {
					continue
				}
				found++
				limit := s.Flags&LowerLimit != 0
				near := math.Abs(s.Z-z)*c/(1+z) < 3*limitShift
				if near && (logN > 18 && limit && s.LogN < logN || logN < 18 && !limit && math.Abs(s.LogN-logN) < max(3*s.LogErr, 0.2)) {
					right++
				}
			}
		}
		t.Logf("log N %.1f: break in %d of %d, right in %d", logN, found, n, right)
		if logN == 0 && found > 1 {
			t.Errorf("%d breaks made up in %d sightlines", found, n)
		}
		if logN > 0 && right < 10 {
			t.Errorf("log N = %.1f: found in %d, right in %d of %d", logN, found, right, n)
		}
	}
}
