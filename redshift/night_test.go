package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// What is left on lines of the night sky is measured: 1 for none and for noise that is larger everywhere, and
// the root of 1 + left^2 where each line leaves that many of the stated errors, at random.
func TestNightLeft(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	const n = 4400
	for _, c := range []struct {
		name       string
		everywhere float64
		left       float64
		want       float64
	}{
		{"nothing", 1, 0, 1},
		{"errors too small everywhere", 2, 0, 1},
		{"three errors on the lines", 1, 3, math.Sqrt(10)},
	} {
		r := rand.New(rand.NewPCG(5, 577))
		s := &Scratch{}
		l := &s.full
		l.n, l.start, l.step = n, 3.575, testStep
		l.weight, s.tmp = make([]float64, n), make([]float64, n)
		for i := range n {
			l.weight[i], s.tmp[i] = 4, 0.5*c.everywhere*r.NormFloat64()
		}
		for _, w := range f.opt.Night {
			x := int(math.Round((math.Log10(w) - l.start) / l.step))
			for i := max(0, x-2); i < min(n, x+3); i++ {
				s.tmp[i] = 0.5 * math.Sqrt(1+c.left*c.left) * r.NormFloat64()
			}
		}
		f.nightLeft(s)
		// Some 450 pixels on lines give their quantile to 4 %; three of that.
		if c.want == 1 && s.night != 1 || math.Abs(s.night/c.want-1) > 0.12 {
			t.Errorf("%s: %.3f, want %.3f", c.name, s.night, c.want)
		}
	}
}

// A line on one of the night sky is the sky's unless it exceeds what others leave; where they leave nothing it is the object's.
func TestNightAirMade(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	const on, off = 7278.1, 7210.0 // OH, and no line within 30 Angstrom
	for _, c := range []struct {
		name             string
		night, wave, snr float64
		width            float64
		want             bool
	}{
		{"a faint line on OH", 2, on, 6, 100, true},
		{"a strong line on OH", 2, on, 9, 100, false},
		{"a faint line off OH", 2, off, 6, 100, false},
		{"a faint line on OH where nothing is left", 1, on, 6, 100, false},
		{"a broad line on OH", 2, on, 6, 1100, false},
	} {
		s := &Scratch{night: c.night}
		if got := f.airMade(s, &LineEvidence{Wave: c.wave, Width: c.width, SNR: c.snr}); got != c.want {
			t.Errorf("%s: %v", c.name, got)
		}
	}
}

// The residuals of a night sky that was taken out badly, on hardly any continuum, have no redshift. Of these, 21 came out secure before they were measured and
// before narrow emission that is left over spoke against one; the bound is 1 %.
func TestNightSkyIsNotSecure(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	r := rand.New(rand.NewPCG(6300, 1))
	const n, spectra = 4400, 200
	secure := 0
	for range spectra {
		g := &spectrum.Grid{Start: 3.575, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n), Independent: n}
		for i := range n {
			g.Flux[i], g.Ivar[i] = 0.02+r.NormFloat64(), 1
		}
		left := 2 * math.Exp(0.8*r.NormFloat64())
		for _, w := range f.opt.Night {
			height := left * math.Exp(0.9*r.NormFloat64())
			for i := range n {
				g.Flux[i] += gaussianAt(i, (math.Log10(w)-g.Start)/testStep, 68/kmsPixel, height)
			}
		}
		res := f.Find(g, s)
		DefaultThresholds().Judge(&res)
		if res.Verdict == Secure {
			secure++
			t.Logf("%.1f left: secure %s at %.4f, %d features, %d of the air", left, res.Family, res.Redshift, res.LinesSeen, res.LinesOfAir)
		}
	}
	t.Logf("%d of %d secure", secure, spectra)
	if secure > spectra/100 {
		t.Errorf("%d of %d night skies came out secure", secure, spectra)
	}
}
