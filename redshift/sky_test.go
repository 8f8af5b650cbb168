package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// What the subtraction of the sky leaves of [O I] 6300, 6364 and sodium, with one line of the
// object, is no redshift: of these spectra one came out secure when lines on the
// night sky counted like others.
func TestSkyLinesDoNotSecure(t *testing.T) {
	finder := newTestFinder(t, builtInFamilies(t))
	scratch := finder.NewScratch()
	const n, snr = 4400, 6.0
	r := rand.New(rand.NewPCG(5577, 6300))
	for _, z := range []float64{0.2831, 0.2711} { // [O III] 5007 a line's separation redward of 6364 and of 6300
		for _, left := range []float64{0.8, 1.5, 3} {
			g := &spectrum.Grid{Start: 3.56, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n), Independent: n}
			for i := range n {
				g.Flux[i], g.Ivar[i] = 1+r.NormFloat64()/snr, snr*snr
			}
			draw := func(wave, height float64) {
				for i := range n {
					g.Flux[i] += gaussianAt(i, (math.Log10(wave)-g.Start)/testStep, 1.2, height)
				}
			}
			draw(5891.6, 0.5*left)
			draw(5897.6, 0.35*left)
			draw(6302.0, left)
			draw(6365.5, 0.33*left)
			draw(5008.24*(1+z), 2.2)
			res := finder.Find(g, scratch)
			DefaultThresholds().Judge(&res)
			if res.Verdict == Secure {
				t.Errorf("%g left of the sky's lines and a line at %.0f: secure %s at %.4f, %d features, %d of the air", left, 5008.24*(1+z), res.Family, res.Redshift, res.LinesSeen, res.LinesOfAir)
			}
			if res.LinesOfAir == 0 && res.LinesSeen > 1 {
				t.Errorf("%g left: %d features, none of the air", left, res.LinesSeen)
			}
		}
	}
}

// An emission line on one of the night sky is of the air, absorption there is not; in bands of water what is broad
// or in absorption, as long as water shows.
func TestAirMade(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	for _, c := range []struct {
		name        string
		left        float64
		wave, width float64
		absorption  bool
		want        bool
	}{
		{"on [O I] 6300", 0, 6302, 100, false, true},
		{"its wing on [O I] 6300", 0, 6304, 100, false, true},
		{"beside [O I] 6300", 0, 6308, 100, false, false},
		{"a broad line on [O I] 6300", 0, 6302, 2000, false, false},
		{"absorption on sodium", 0, 5892, 100, true, false},
		{"absorption in water", 0.1, 8200, 100, true, true},
		{"a broad line in water", 0.1, 8200, 2000, false, true},
		{"a narrow line in water", 0.1, 8200, 100, false, false},
		{"a broad line where no water shows", 0.01, 8200, 2000, false, false},
		{"a broad line beside water", 0.1, 7600, 2000, false, false},
	} {
		s := &Scratch{left: c.left}
		if got := f.airMade(s, &LineEvidence{Wave: c.wave, Width: c.width, Absorption: c.absorption}); got != c.want {
			t.Errorf("%s: %v", c.name, got)
		}
	}
}
