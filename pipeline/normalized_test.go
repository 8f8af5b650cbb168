package pipeline

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// fluxGrid is a spectrum of n pixels from a wavelength on with noise.
func fluxGrid(first float64, n int, snr float64, flux func(wave float64) float64) *spectrum.Grid {
	r := rand.New(rand.NewPCG(5, 5))
	g := &spectrum.Grid{Start: math.Log10(first), Step: 1e-4, Flux: make([]float64, n), Ivar: make([]float64, n)}
	for i := range g.Flux {
		f := flux(math.Pow(10, g.LogWave(i)))
		g.Flux[i], g.Ivar[i] = f+r.NormFloat64()/snr, snr*snr
	}
	return g
}

// forest is the normalized flux of a quasar at z: lines of random depth, so many that
// the mean is the transmission of the intergalactic medium (Inoue et al. 2014), with
// half of the pixels hardly touched.
func forestFlux(z float64) func(wave float64) float64 {
	r := rand.New(rand.NewPCG(8, 8))
	var center, depth []float64
	for w := 3000.0; w < 1215.67*(1+z); w += 12 + 8*r.Float64() {
		center, depth = append(center, w), append(depth, 3*(1-hydrogen.Transmission(z, w))*r.Float64())
	}
	return func(wave float64) float64 {
		tau := 0.0
		for i, c := range center {
			u := (wave - c) / 1.5
			if u > -6 && u < 6 {
				tau += depth[i] * math.Exp(-0.5*u*u)
			}
		}
		return math.Exp(-tau)
	}
}

func TestNormalized(t *testing.T) {
	forest := forestFlux(3)
	flat := func(float64) float64 { return 1 }
	// A star of 5,800 K in relative flux, 1 at 5556 Angstrom as in stellar libraries.
	planck := func(wave float64) float64 { return math.Pow(wave, -5) / (math.Exp(1.43877e8/(wave*5800)) - 1) }
	star := func(wave float64) float64 { return planck(wave) / planck(5556) }
	scale := func(k float64, f func(float64) float64) func(float64) float64 {
		return func(wave float64) float64 { return k * f(wave) }
	}
	for _, c := range []struct {
		name string
		g    *spectrum.Grid
		unit string
		want bool
	}{
		{"a quasar with its forest over its continuum", fluxGrid(4000, 3000, 30, forest), "", true},
		{"the same with a unit that says so little", fluxGrid(4000, 3000, 30, forest), "ADU", true},
		{"a star over its continuum", fluxGrid(3900, 3000, 50, flat), "", true},
		{"a continuum that is off by 8 %", fluxGrid(3900, 3000, 50, scale(0.92, flat)), "", true},
		{"one that is off by 20 %", fluxGrid(3900, 3000, 50, scale(0.8, flat)), "", false},
		{"a star in relative flux", fluxGrid(3900, 4000, 50, star), "", false},
		{"a slope of a quarter", fluxGrid(3900, 4000, 50, func(wave float64) float64 { return math.Pow(wave/6000, -0.8) }), "", false},
		{"a faint galaxy that is flat at 1e-17 erg", fluxGrid(3900, 4000, 30, flat), "1E-17 erg/cm^2/s/Ang", false},
		{"the same in uppercase", fluxGrid(3900, 4000, 30, flat), "10**(-17) ERG/S/CM2/A", false},
		{"microjansky", fluxGrid(3900, 4000, 30, flat), "uJy", false},
		{"watt", fluxGrid(3900, 4000, 30, flat), "W/m2/um", false},
		{"watt with a blank", fluxGrid(3900, 4000, 30, flat), "1e-20 W m-2 um-1", false},
		{"a level of 30", fluxGrid(3900, 4000, 50, scale(30, flat)), "", false},
		{"nothing", fluxGrid(3900, 4000, 50, scale(0, flat)), "", false},
		{"noise about 1 at S/N 1", fluxGrid(3900, 4000, 1, flat), "", false},
		{"few pixels", fluxGrid(5000, 799, 50, flat), "", false},
		{"just enough", fluxGrid(5000, 801, 50, flat), "", true},
		{"no pixels", &spectrum.Grid{Step: 1e-4}, "", false},
	} {
		before := append([]float64(nil), c.g.Flux...)
		if got := normalized(c.g, c.unit, nil); got != c.want {
			t.Errorf("%s: %v", c.name, got)
		}
		for i := range before {
			if before[i] != c.g.Flux[i] {
				t.Fatalf("%s: pixel %d of the spectrum was changed", c.name, i)
			}
		}
	}
	// Pixels without weight say nothing, whatever they hold.
	g := fluxGrid(3900, 3000, 50, flat)
	for i := range g.Flux {
		if i%3 == 0 || i > 1000 && i < 1800 {
			g.Flux[i], g.Ivar[i] = 1e9, 0
		}
	}
	if !normalized(g, "", nil) {
		t.Error("pixels without weight hide that the spectrum is normalized")
	}
	// A tenth of its stretches may be otherwise, two fifths not.
	for _, c := range []struct {
		share float64
		want  bool
	}{{0.1, true}, {0.2, true}, {0.4, false}} {
		g := fluxGrid(3900, 4000, 50, flat)
		for i := range int(c.share * 4000) {
			g.Flux[i] *= 3
		}
		if got := normalized(g, "", nil); got != c.want {
			t.Errorf("%g of the spectrum at three times the level: %v", c.share, got)
		}
	}
}
