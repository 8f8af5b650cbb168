package redshift

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The lines of a second galaxy over those of the first are told with their wavelengths; one galaxy
// alone, one line more as of a cosmic ray, noise that is twice what is stated, and coronal lines of an
// active nucleus tell of none.
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
		own   []float64 // rest wavelengths of more lines of the first
		told  bool
	}{
		{"two galaxies", 4, 1, nil, true},
		{"one galaxy", 0, 1, nil, false},
		{"one galaxy and a line", 1, 1, nil, false},
		{"one galaxy, noise that is twice what is stated", 0, 2, nil, false},
		// [Fe VII] 5722 and 6089, [Fe X] 6376, [Fe XI] 7894, vacuum (NIST, from memory).
		{"one galaxy with coronal lines", 0, 1, []float64{5722.3, 6088.7, 6376.3, 7894}, false},
		{"the same lines, of no ion", 0, 1, []float64{5650, 6020, 6450, 7800}, true},
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
		for _, rest := range c.own {
			for i := range g.Flux {
				g.Flux[i] += gaussianAt(i, (math.Log10(rest*(1+first))-g.Start)/g.Step, 1.8, 12)
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
			known := len(c.own) > 0
			for _, l := range lines {
				known = known || math.Abs(w-l.rest*(1+second)) < 4
			}
			if !known {
				t.Errorf("%s: a feature at %.1f Angstrom", c.name, w)
			}
		}
	}
}
