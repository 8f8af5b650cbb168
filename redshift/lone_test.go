package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// One line on a smooth continuum may be any line: [O II], H-alpha, Lyman-alpha,
// C IV. No redshift from it is secure, however strong it is, whether it is narrower or wider
// than the templates' lines; nor from two lines that have nothing to do with each other,
// but for chance agreements within 1,000 km/s, of which one in 60 is allowed.
func TestLoneLinesAreNotSecure(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	finder := newTestFinder(t, builtInFamilies(t))
	scratch := finder.NewScratch()
	for _, kind := range []struct {
		name    string
		lines   int
		least   float64 // Gaussian sigma, km/s
		most    float64
		allowed int // of 60
	}{
		{"a narrow line", 1, 60, 250, 0},
		{"a broad line", 1, 1200, 4000, 2},
		{"two narrow lines", 2, 60, 250, 1},
	} {
		r := rand.New(rand.NewPCG(7, 3728))
		secure := 0
		for range 60 {
			const n = 4400
			g := &spectrum.Grid{Start: 3.56, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n), Independent: n}
			for i := range n {
				g.Flux[i], g.Ivar[i] = 1+r.NormFloat64()/10, 100
			}
			for range kind.lines {
				sigma := kind.least * math.Pow(kind.most/kind.least, r.Float64()) / kmsPixel
				center, height := n*(0.1+0.8*r.Float64()), 1+4*r.Float64()
				for i := range n {
					g.Flux[i] += gaussianAt(i, center, sigma, height)
				}
			}
			res := finder.Find(g, scratch)
			DefaultThresholds().Judge(&res)
			if res.Verdict == Secure {
				secure++
				for _, e := range res.Lines {
					if e.Seen {
						t.Logf("   %s %.0f w %.0f snr %.1f model %.1f", e.Name, e.Wave, e.Width, e.SNR, e.Model)
					}
				}
				t.Logf("%s: secure %s at %.4f, gap %.1f, %d features, %d missing", kind.name, res.Family, res.Redshift, res.Gap, res.LinesSeen, res.LinesMissing)
			}
		}
		if secure > kind.allowed {
			t.Errorf("%s: %d of 60 spectra came out secure, want at most %d", kind.name, secure, kind.allowed)
		}
	}
}
