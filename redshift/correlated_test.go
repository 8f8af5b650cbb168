package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// Pixels that scatter together and ripples left by a reduction are not
// evidence, however many pixels they cover: none of these spectra, which have
// no line at all, may come out secure. 100 of each kind: a rate of 3 percent
// would be noticed with a probability of 95 percent.
func TestCorrelatedNoiseIsNotSecure(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	finder, err := NewFinder(builtInFamilies(t), testStep, DefaultOptions())
	if err != nil {
		t.Fatal(err)
	}
	scratch := finder.NewScratch()
	kinds := []struct {
		name   string
		snr    float64
		smooth int     // pixels over which noise is averaged
		ripple float64 // amplitude, fraction of the continuum
		period float64 // pixels
	}{
		{"three pixels together", 10, 3, 0, 0},
		{"five pixels together, faint", 2, 5, 0, 0},
		{"ripple of three percent", 30, 1, 0.03, 50},
	}
	for _, kind := range kinds {
		r := rand.New(rand.NewPCG(31, 14))
		for n := range 100 {
			g := &spectrum.Grid{Start: 3.56, Step: testStep, Flux: make([]float64, 4400), Ivar: make([]float64, 4400), Independent: 4400}
			white := make([]float64, len(g.Flux)+kind.smooth)
			for i := range white {
				white[i] = r.NormFloat64()
			}
			phase := 2 * math.Pi * r.Float64()
			for i := range g.Flux {
				noise := 0.0
				for k := range kind.smooth {
					noise += white[i+k]
				}
				noise /= math.Sqrt(float64(kind.smooth)) // stated per pixel rightly
				level := 1 + 0.5*float64(i)/4400
				if kind.ripple > 0 {
					level *= 1 + kind.ripple*math.Sin(phase+2*math.Pi*float64(i)/kind.period)
				}
				g.Flux[i], g.Ivar[i] = level+noise/kind.snr, kind.snr*kind.snr
			}
			res := finder.Find(g, scratch)
			DefaultThresholds().Judge(&res)
			if res.Verdict == Secure {
				t.Errorf("%s, spectrum %d: %s at %.4f came out secure, gap %.1f, %d features, correlation %.2f", kind.name, n, res.Family, res.Redshift, res.Gap, res.LinesSeen, res.Correlation)
			}
		}
	}
}
