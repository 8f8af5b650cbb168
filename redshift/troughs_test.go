package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/hydrogen"
)

// troughLevel is a level of the given fluxes from 3600 Angstrom on with an
// error of the flux unit over snr, noise included, and what masks its troughs.
func troughLevel(seed uint64, n int, snr float64, flux func(wave float64) float64) (*Scratch, *level) {
	r := rand.New(rand.NewPCG(seed, 21))
	s := (&Finder{}).NewScratch()
	l := &s.full
	*l = *bareLevel(n)
	l.start = math.Log10(3600)
	for i := range n {
		l.weight[i] = snr * snr
		l.resid[i] = flux(pow10(logWaveAt(l, float64(i)))) + r.NormFloat64()/snr
	}
	return s, l
}

// masked counts pixels without weight.
func masked(l *level) int {
	n := 0
	for _, w := range l.weight {
		if w == 0 {
			n++
		}
	}
	return n
}

// away is a velocity in km/s from a wavelength.
func away(wave, center float64) float64 { return speedOfLight * math.Log(wave/center) }

// damped is the transmission of a damped absorber, exp(-(x0/x)^2): only the Lorentz
// wings of the line count. Rest equivalent width 2 sqrt(pi) x0, 7.3 Angstrom
// (N/1e20)^(1/2) (common practice, no source).
func damped(logN, z float64) func(wave float64) float64 {
	x0 := 7.3 * math.Sqrt(math.Pow(10, logN-20)) / (2 * math.Sqrt(math.Pi))
	return func(wave float64) float64 {
		x := wave/(1+z) - 1215.67
		return math.Exp(-x0 * x0 / (x*x + 1e-9))
	}
}

// A trough darker than 0.12 of the light beside it goes out to where the flux is 0.8 of it,
// as long as that is within one and a half times the dark width, and nothing else.
func TestMaskTroughs(t *testing.T) {
	const z = 2.5
	center := 1215.67 * (1 + z)
	for _, c := range []struct {
		name string
		snr  float64
		flux func(wave float64) float64
	}{
		{"a damped absorber of 21.5", 100, damped(21.5, z)},
		{"a damped absorber of 21.0", 100, damped(21.0, z)},
		{"the same, noisy", 30, damped(21.5, z)},
		{"broad absorption, half width 2,600 km/s", 100, func(wave float64) float64 {
			u := away(wave, center) / 1800
			return math.Exp(-6 * math.Exp(-0.5*u*u))
		}},
		{"wings without an end nearby", 100, func(wave float64) float64 {
			switch v := math.Abs(away(wave, center)); {
			case v < 850:
				return 0
			case v < 4850:
				return 0.7
			}
			return 1
		}},
		{"a trough in a spectrum that falls to the red", 100, func(wave float64) float64 {
			return math.Pow(wave/center, -1.5) * damped(21.5, z)(wave)
		}},
	} {
		s, l := troughLevel(3, 4000, c.snr, c.flux)
		s.maskTroughs(l)
		// The edge of the dark; the light, the upper quartile of what rises over
		// 6,000 km/s beyond it, so its value after 4,500; the edge of the wings.
		at := func(v float64) float64 { return c.flux(center * math.Exp(v/speedOfLight)) }
		dark, rim := 0.0, 0.0
		for v := 0.0; v < 8000 && at(v) < 0.12; v += 5 {
			dark = v
		}
		light := math.Min(at(dark+4500), at(-dark-4500))
		for v := 0.0; v < 20000 && at(v) < 0.8*light; v += 5 {
			rim = v
		}
		// Bins of 276 km/s know the dark to one on each side, so the reach of 1.5 times
		// its width to three; noise of 1/60 a bin moves the rim of the wings, which rise by
		// 1/60 over two bins, by as much.
		reach := math.Min(rim, dark*4)
		slack := 2 * 276.0
		if c.snr < 50 {
			slack += 3 * 276
		}
		if rim > dark*4 {
			slack += 3 * 276
		}
		for i, w := range l.weight {
			v := math.Abs(away(pow10(logWaveAt(l, float64(i))), center))
			if v < reach-slack && w != 0 || v > reach+slack && w == 0 {
				t.Errorf("%s (dark to %.0f km/s, wings to %.0f): weight %g at %.0f km/s", c.name, dark, rim, w, v)
				break
			}
		}
	}
}

// What is dark for another reason keeps its weight.
func TestMaskTroughsLeaves(t *testing.T) {
	bands := []head{{Wave: 4956, Depth: 0.9, Tail: 120}, {Wave: 5449.5, Depth: 0.9, Tail: 110}, {Wave: 6150, Depth: 0.9, Tail: 200}, {Wave: 7056, Depth: 0.9, Tail: 170}}
	line := func(wave, center, sigma float64) float64 {
		u := away(wave, center) / sigma
		return math.Exp(-0.5 * u * u)
	}
	hole := func(half float64) func(wave float64) float64 {
		return func(wave float64) float64 {
			if math.Abs(away(wave, 5500)) < half {
				return 0
			}
			return 1
		}
	}
	for _, c := range []struct {
		name string
		snr  []float64
		flux func(wave float64) float64
	}{
		{"the edge of the forest at z = 6", []float64{5, 100}, func(wave float64) float64 { return hydrogen.Transmission(6, wave) }},
		{"the same with light that leaks through at 7,900 Angstrom", []float64{100}, func(wave float64) float64 {
			return hydrogen.Transmission(6, wave) + 0.3*line(wave, 7900, 400)
		}},
		{"bands of an M star, 90 % deep, beside ever more light", []float64{20, 100}, func(wave float64) float64 {
			f := math.Pow(wave/6000, 4)
			for i := range bands {
				f *= 1 - bands[i].at(wave)
			}
			return f
		}},
		{"a nebula's lines on hardly any continuum", []float64{20, 200}, func(wave float64) float64 {
			f := 0.01
			for _, w := range []float64{3728, 4862.7, 4960.3, 5008.2, 6549.9, 6564.6, 6585.3, 6718, 6733} {
				f += line(wave, w, 200)
			}
			return f
		}},
		{"a black line 600 km/s to either side", []float64{100}, hole(600)},
		{"darkness over 20,000 km/s", []float64{100}, hole(10000)},
		{"light to the blue alone", []float64{100}, func(wave float64) float64 {
			if wave > 5500 {
				return 0.02
			}
			return 1
		}},
		{"light to the red alone", []float64{100}, func(wave float64) float64 {
			if wave < 5500 {
				return 0.02
			}
			return 1
		}},
		{"noise", []float64{0.1, 0.3, 1, 3}, func(float64) float64 { return 1 }},
		{"noise around nothing", []float64{1}, func(float64) float64 { return 0 }},
	} {
		for _, snr := range c.snr {
			for seed := range uint64(10) {
				s, l := troughLevel(seed, 4400, snr, c.flux)
				s.maskTroughs(l)
				if n := masked(l); n > 0 {
					t.Errorf("%s, S/N %g, seed %d: %d pixels lost their weight", c.name, snr, seed, n)
					break
				}
			}
		}
	}
}

// A gap is no trough: beside one, and across one inside a trough, all stays as without
// it, and no pixel of a gap gets weight.
func TestMaskTroughsAndGaps(t *testing.T) {
	gap := func(l *level, lo, hi float64) {
		for i := range l.weight {
			if w := pow10(logWaveAt(l, float64(i))); w > lo && w < hi {
				l.weight[i], l.resid[i] = 0, 0
			}
		}
	}
	flat := func(float64) float64 { return 1 }
	s, l := troughLevel(1, 4000, 100, flat)
	gap(l, 5400, 5500)
	before := masked(l)
	s.maskTroughs(l)
	if n := masked(l); n != before || n == 0 {
		t.Errorf("%d pixels without weight, %d beforehand", n, before)
	}
	// A trough that ends in a gap after 13,000 km/s: the light on its red side is beyond.
	s, l = troughLevel(1, 4000, 100, func(wave float64) float64 {
		if v := away(wave, 5000); v > 0 && v < 15700 {
			return 0
		}
		return 1
	})
	edge, end := 5000*math.Exp(13000/speedOfLight), 5000*math.Exp(16000/speedOfLight)
	gap(l, edge, end)
	s.maskTroughs(l)
	for i, w := range l.weight {
		wave := pow10(logWaveAt(l, float64(i)))
		if inside := wave > 5000*math.Exp(300/speedOfLight) && wave < edge; inside && w != 0 {
			t.Errorf("pixel at %.1f Angstrom, in a trough beside a gap, weighs %g", wave, w)
			break
		}
		if outside := wave < 5000*math.Exp(-300/speedOfLight) || wave > end*math.Exp(600/speedOfLight); outside && w == 0 {
			t.Errorf("pixel at %.1f Angstrom, outside the trough, lost its weight", wave)
			break
		}
	}
	// Shorter than a bin, and nothing at all.
	for _, n := range []int{0, 3} {
		s, l = troughLevel(1, n, 1, flat)
		s.maskTroughs(l)
		if masked(l) > 0 {
			t.Errorf("pixels of a spectrum of %d lost their weight", n)
		}
	}
}
