package redshift

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The lines of a second galaxy over those of the first are told with their wavelengths; one galaxy
// alone, one line more as of a cosmic ray, and noise that is twice what is stated tell of none.
func TestSecondObjectIsTold(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	const first, second = 0.1, 0.37
	// [O II], H-beta and [O III] (vacuum, from memory), in units of the noise.
	lines := []struct{ rest, height float64 }{{3728.5, 8}, {4862.7, 8}, {4960.3, 6}, {5008.2, 18}}
	for _, c := range []struct {
		name  string
		add   int // of the second's lines, from the last
		noise float64
		told  bool
	}{
		{"two galaxies", 4, 1, true},
		{"one galaxy", 0, 1, false},
		{"one galaxy and a line", 1, 1, false},
		{"one galaxy, noise that is twice what is stated", 0, 2, false},
	} {
		r := rand.New(rand.NewPCG(3, 14))
		g := emissionLines(t, r, first, 90, 15)
		for i := range g.Flux {
			g.Flux[i] += math.Sqrt(c.noise*c.noise-1) * r.NormFloat64()
		}
		for _, l := range lines[len(lines)-c.add:] {
			for i := range g.Flux {
				g.Flux[i] += gaussianAt(i, (math.Log10(l.rest*(1+second))-g.Start)/g.Step, 1.8, l.height)
			}
		}
		res := f.Find(g, s)
		DefaultThresholds().Judge(&res)
		if velocity(res.Redshift, first) > 100 {
			t.Errorf("%s: found at %.4f", c.name, res.Redshift)
		}
		if res.Unexplained != c.told {
			t.Errorf("%s: told %v: %.0f", c.name, res.Unexplained, res.Leftovers)
		}
		for _, w := range res.Leftovers {
			known := false
			for _, l := range lines {
				known = known || math.Abs(w-l.rest*(1+second)) < 4
			}
			if !known {
				t.Errorf("%s: a feature at %.1f Angstrom", c.name, w)
			}
		}
	}
}
