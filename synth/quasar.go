package synth

import (
	"math"
	"math/rand/v2"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// broadLine is a broad emission line: rest wavelength in vacuum, typical rest
// equivalent width in Angstrom, typical velocity in km/s (high-ionization lines
// move towards us) and width relative to the object's.
type broadLine struct{ wave, ew, velocity, width float64 }

var broadLines = []broadLine{
	{1033.8, 9, -100, 1.1}, {1215.67, 62, 0, 1}, {1240.8, 14, -200, 1.1}, {1305.5, 2.5, 0, 0.8}, {1335.3, 0.8, 0, 0.7},
	{1398.3, 8, -350, 1.1}, {1549.5, 30, -550, 1.1}, {1640.4, 6, -500, 1.8}, {1664, 3, -200, 1.2}, {1858, 2, -100, 0.9},
	{1892, 4, -100, 0.9}, {1908.7, 18, -150, 1.1}, {2326, 2, -50, 0.9}, {2799.1, 32, 0, 0.85}, {4102.89, 6, 0, 0.9},
	{4341.68, 13, 0, 0.9}, {4687.02, 4, 0, 1.3}, {4862.68, 46, 0, 0.9}, {5877.25, 5, 0, 1}, {6564.61, 195, 0, 0.85},
	{3890, 2, 0, 0.9}, {3971.2, 3, 0, 0.9}, {7067, 3, 0, 0.9},
}

// ironHumps are smooth blends of Fe II: center, equivalent width, half width in
// Angstrom, by eye.
var ironHumps = []struct{ center, ew, half float64 }{
	{2080, 8, 60}, {2240, 14, 60}, {2400, 22, 60}, {2500, 26, 55}, {2590, 14, 45}, {2750, 10, 50}, {2900, 9, 60},
	{3180, 8, 80}, {3500, 9, 120}, {4520, 20, 55}, {4600, 16, 50}, {5190, 20, 55}, {5320, 20, 60}, {5900, 4, 120},
}

// absorber is a damped Lyman-alpha system.
type absorber struct{ z, logNHI float64 }

// quasar paints a quasar at redshift z; the absorber is nil where no damped
// system lies in front of it.
func quasar(r *rand.Rand, z float64) (func(c *canvas), *absorber) {
	slope := -1.45 + 0.35*r.NormFloat64()
	width := math.Exp(math.Log(1900) + 0.28*r.NormFloat64()) // sigma, km/s
	lines := math.Exp(0.22 * r.NormFloat64())
	iron := math.Exp(0.45 * r.NormFloat64())
	narrow := math.Exp(math.Log(9) + 0.8*r.NormFloat64())
	scatter := make([]float64, len(broadLines))
	for i := range scatter {
		scatter[i] = math.Exp(0.22 * r.NormFloat64())
	}
	sight := newForest(r)
	var dla *absorber
	if z > 2.4 && r.Float64() < 0.4 {
		low := math.Max(2.15, (1+z)*0.86-1)
		dla = &absorber{z: low + (z-0.06-low)*r.Float64(), logNHI: 20.3 + 1.0*r.Float64()}
	}
	motion := newQuasarMotion(r)
	sight.zone = zoneVelocity * math.Exp(zoneScatter*r.NormFloat64())
	return func(c *canvas) {
		c.fill(func(w float64) float64 {
			f := math.Pow(w/3000, slope)
			if w > 4800 {
				f *= math.Pow(w/4800, 0.9)
			}
			// Balmer continuum, cut at the edge and blended away below 2500.
			return f * (1 + 0.16*step((3640-w)/25)*math.Exp(-math.Pow((3300-w)/900, 2)))
		})
		for _, h := range ironHumps {
			level := c.at(h.center)
			c.emit(h.center, 0, spectrum.SpeedOfLight*h.half/h.center, iron*h.ew*level*(1+z))
		}
		for i, l := range broadLines {
			level := c.at(l.wave)
			flux := l.ew * lines * scatter[i] * level * (1 + z)
			// Two parts, so that the profile is more pointed than a Gaussian.
			velocity := motion.of(l.wave)
			c.emit(l.wave, velocity+l.velocity, 0.6*width*l.width, 0.45*flux)
			c.emit(l.wave, velocity+l.velocity*1.15, 1.5*width*l.width, 0.55*flux)
		}
		for _, l := range []struct{ wave, share float64 }{{5008.24, 1}, {4960.30, 0.336}, {3728.5, 0.18}, {3869.86, 0.10},
			{3426.86, 0.10}, {4364.44, 0.03}, {6585.28, 0.35}, {6549.86, 0.12}, {6718.29, 0.1}, {6732.67, 0.1}} {
			c.emit(l.wave, motion.narrow, 170, narrow*l.share*c.at(5100)*(1+z))
		}
		sight.dim(c)
		if dla != nil {
			dla.dim(c)
		}
	}, dla
}

// dim multiplies in the Lyman lines of a damped system and a few metal lines
// that come with it.
func (a *absorber) dim(c *canvas) {
	column := math.Pow(10, a.logNHI)
	for n := 2; n <= 5; n++ {
		t, err := hydrogen.NewTransition(1, n)
		if err != nil {
			panic(err) // quantum numbers are constants of this package
		}
		line := t.Absorption()
		center := t.Wave * (1 + a.z)
		first, end := c.window(center*0.9, center*1.1)
		for i := first; i < end; i++ {
			c.flux[i] *= math.Exp(-line.OpticalDepth(column, 30, c.wave[i]/(1+a.z)))
		}
	}
	system := canvas{wave: c.wave, flux: c.flux, z: a.z, blur: c.blur}
	for _, l := range []struct{ wave, ew float64 }{{1260.42, 0.6}, {1302.17, 0.5}, {1334.53, 0.6}, {1526.71, 0.45}, {1548.20, 0.5},
		{1550.78, 0.35}, {1608.45, 0.25}, {1670.79, 0.5}, {2344.21, 0.6}, {2382.77, 0.9}, {2600.17, 0.9}, {2796.35, 1.3}, {2803.53, 1.1}} {
		system.absorb(l.wave, 0, 60, l.ew)
	}
}

// forest is one line of sight through the intergalactic medium: the mean optical
// depth of package hydrogen times a fluctuation that is lognormal with mean one
// and correlated over some hundred km/s.
type forest struct {
	factor []float64
	zone   float64 // velocity from the source, km/s, at which its own light halves the optical depth; 0 for none
}

// Quasars thin the gas around them (Bajtlik, Duncan & Ostriker 1988, ApJ 327, 570): by
// 1/(1+(zone/v)^2). Size and scatter (in ln) of the zone: common practice, no source.
const (
	zoneVelocity = 1000.0
	zoneScatter  = 0.6
)

// Grid of the fluctuation.
const (
	forestStart = 3.5  // log10 Angstrom
	forestStep  = 1e-4 // dex
	forestLen   = 5500
)

func newForest(r *rand.Rand) *forest {
	const scatter, memory = 0.9, 0.55
	f := &forest{factor: make([]float64, forestLen)}
	state := r.NormFloat64()
	for i := range f.factor {
		state = memory*state + math.Sqrt(1-memory*memory)*r.NormFloat64()
		f.factor[i] = math.Exp(scatter*state - scatter*scatter/2)
	}
	return f
}

// dim multiplies the transmission in.
func (f *forest) dim(c *canvas) {
	edge := 1215.67 * (1 + c.z)
	for i, w := range c.wave {
		if w >= edge {
			break
		}
		x := (math.Log10(w) - forestStart) / forestStep
		k := min(max(int(x), 0), forestLen-2)
		t := x - float64(k)
		depth := f.factor[k]*(1-t) + f.factor[k+1]*t
		if f.zone > 0 {
			q := f.zone / (spectrum.SpeedOfLight * math.Log(edge/w))
			depth /= 1 + q*q
		}
		c.flux[i] *= math.Pow(hydrogen.Transmission(c.z, w), depth)
	}
}
