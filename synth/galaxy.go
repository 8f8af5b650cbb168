package synth

import (
	"math"
	"math/rand/v2"

	"duskline/hydrogen"
)

// oldStars is the continuum of an old stellar population at rest wavelength w:
// blackbodies of giants and turn-off stars with the break at 4000 Angstrom.
func oldStars(w, breakDepth float64) float64 {
	f := 0.65*planck(w, 4500) + 0.35*planck(w, 5900)
	f *= 1 - breakDepth*step((3995-w)/28)
	return f * (1 - 0.45*step((2850-w)/60))
}

// oldLines draws the absorption lines of an old population.
func oldLines(c *canvas, sigma, metals float64) {
	c.draw(calciumHK, 0.85, 0, math.Hypot(sigma, 330))
	c.draw(ironLines, 1.25*metals, 0, sigma)
	c.draw(magnesiumB, 1.5*metals, 0, sigma)
	c.draw(sodiumD, 2*metals, 0, sigma)
	c.draw(calciumTriplet, 1, 0, sigma)
	c.absorb(4305.6, 0, math.Hypot(sigma, 650), 6*metals)
	c.absorb(3875, 0, math.Hypot(sigma, 900), 6*metals)
	c.absorb(5130, 0, math.Hypot(sigma, 2600), 10*metals)
	c.absorb(4174, 0, math.Hypot(sigma, 1300), 2.5*metals)
	c.absorb(5860, 0, math.Hypot(sigma, 2500), 4*metals)
	c.absorb(6215, 0, math.Hypot(sigma, 2200), 5*metals)
	c.absorb(7120, 0, math.Hypot(sigma, 2000), 7*metals)
	for i, w := range series(2, 3, 6) {
		c.absorb(w, 0, math.Hypot(sigma, 90), []float64{1.2, 1.5, 0.8, 0.8}[i])
	}
	c.absorb(2852.96, 0, math.Hypot(sigma, 300), 7*metals)
	c.absorb(2799.1, 0, math.Hypot(sigma, 500), 12*metals)
}

// passiveGalaxy paints a galaxy of old stars, now and then with weak lines of
// ionized gas.
func passiveGalaxy(r *rand.Rand) func(c *canvas) {
	sigma := 130 + 170*r.Float64()
	metals := 0.8 + 0.4*r.Float64()
	depth := 0.36 + 0.12*r.Float64()
	tilt := r.NormFloat64() * 0.2
	gas := 0.0
	if r.Float64() < 0.25 {
		gas = 0.5 + 2*r.Float64()
	}
	return func(c *canvas) {
		c.fill(func(w float64) float64 { return oldStars(w, depth) * math.Pow(w/5500, tilt) })
		oldLines(c, sigma, metals)
		if gas > 0 {
			level := c.at(6600) * gas
			nebula{hBeta: level / 4, oiii: 1.5, oii: 4, nii: 1.3, sii: 0.9, dust: 0.3, sigma: sigma * 0.8}.paint(c)
		}
	}
}

// nebula is a set of emission lines of ionized gas. hBeta is the flux of
// H beta; the others are relative to it ([O III] 5007, [O II] 3727 both lines)
// or to H alpha ([N II] 6583, [S II] both lines), before dust.
type nebula struct {
	hBeta, oiii, oii, nii, sii float64
	dust                       float64 // color excess in magnitudes
	sigma                      float64 // km/s
}

func (n nebula) paint(c *canvas) {
	line := func(wave, flux float64) {
		// A power law of wavelength with 3.6 magnitudes at H beta per magnitude of
		// color excess, near enough to the reddening of star-forming galaxies.
		dim := math.Pow(10, -0.4*n.dust*3.6*(math.Pow(4862.7/wave, 1.2)-1))
		c.emit(wave, 0, n.sigma, n.hBeta*flux*dim*(1+c.z))
	}
	// Case B recombination, 10,000 K, 100 cm^-3.
	alpha := hydrogen.CaseB(1e4, 100, 3)
	for i, w := range series(2, 3, 9) {
		line(w, hydrogen.CaseB(1e4, 100, 3+i))
	}
	line(5008.24, n.oiii)
	line(4960.30, n.oiii/2.98)
	line(4364.44, n.oiii*0.008)
	line(3727.09, n.oii*0.43)
	line(3729.88, n.oii*0.57)
	line(6585.28, n.nii*alpha)
	line(6549.86, n.nii*alpha/2.95)
	line(6718.29, n.sii*alpha*0.57)
	line(6732.67, n.sii*alpha*0.43)
	line(3869.86, n.oiii*0.09)
	line(3968.59, n.oiii*0.028)
	line(5877.25, 0.12)
	line(6302.05, 0.03*alpha)
	line(7137.76, 0.11)
	line(9071.09, 0.30)
	line(9533.71, 0.74)
}

// emissionGalaxy paints a star-forming galaxy.
func emissionGalaxy(r *rand.Rand) func(c *canvas) {
	young := 0.35 + 0.5*r.Float64() // share of young stars at 5500 Angstrom
	slope := -1.7 + 0.8*r.Float64()
	jump := 0.15 + 0.25*r.Float64()
	metal := r.Float64() // 0 poor, 1 rich
	ewBeta := math.Exp(math.Log(6) + 0.9*r.NormFloat64())
	n := nebula{
		oiii:  math.Pow(10, 0.70-1.1*metal+0.12*r.NormFloat64()),
		oii:   math.Pow(10, 0.45-0.25*math.Abs(metal-0.45)+0.12*r.NormFloat64()),
		nii:   math.Pow(10, -1.4+1.0*metal+0.08*r.NormFloat64()),
		sii:   math.Pow(10, -0.75+0.25*metal+0.08*r.NormFloat64()),
		dust:  0.35 * r.Float64(),
		sigma: 40 + 70*r.Float64(),
	}
	return func(c *canvas) {
		continuum := func(w float64) float64 {
			y := math.Pow(w/5500, slope) * (1 - jump*step((3720-w)/18))
			return young*y + (1-young)*oldStars(w, 0.35)
		}
		c.fill(continuum)
		c.draw(calciumHK, 0.45*(1-young)+0.1, 0, 350)
		c.draw(ironLines, 0.8*(1-young), 0, 100)
		c.draw(magnesiumB, 0.8*(1-young), 0, 120)
		c.draw(sodiumD, 0.8, 0, 120)
		for i, w := range series(2, 3, 12) {
			c.absorb(w, 0, 450, 4*young*math.Pow(0.95, float64(i)))
		}
		for _, l := range []struct{ wave, ew float64 }{{2344.21, 1.6}, {2374.46, 1.3}, {2382.77, 1.8}, {2586.65, 1.7},
			{2600.17, 2.0}, {2796.35, 2.4}, {2803.53, 2.1}, {2852.96, 0.8}} {
			c.absorb(l.wave, -90, 150, l.ew*(0.4+metal))
		}
		n.hBeta = ewBeta * continuum(4862.7)
		n.paint(c)
	}
}

// distantGalaxy paints a star-forming galaxy seen in the rest ultraviolet:
// Lyman break, forest, Lyman alpha in emission or absorption, interstellar lines
// pushed outward by a wind.
func distantGalaxy(r *rand.Rand) func(c *canvas) {
	slope := -2.1 + 0.8*r.Float64()
	lya := r.NormFloat64()*18 + 8   // rest equivalent width, positive in emission
	outflow := 80 + 180*r.Float64() // km/s, the typical one
	metal := 0.6 + 0.8*r.Float64()
	sight := newForest(r)
	outflow += outflowMotion * r.NormFloat64()
	lag := lymanAlphaMotion * r.NormFloat64() // of Lyman-alpha in emission
	return func(c *canvas) {
		c.fill(func(w float64) float64 {
			f := math.Pow(w/1500, slope)
			return f * (1 - 0.75*step((912-w)/1.5))
		})
		for _, l := range []struct{ wave, ew, sigma float64 }{
			{1190.42, 0.9, 180}, {1193.29, 1.0, 180}, {1206.50, 1.3, 200}, {1260.42, 1.6, 190}, {1302.17, 1.3, 190}, {1304.37, 1.0, 190},
			{1334.53, 1.7, 200}, {1393.76, 1.2, 220}, {1402.77, 0.8, 220}, {1526.71, 1.5, 190}, {1548.20, 1.4, 300}, {1550.78, 1.2, 300},
			{1608.45, 0.9, 170}, {1670.79, 1.2, 180}, {1854.72, 0.7, 180}, {1862.79, 0.5, 180}, {1025.72, 2.5, 250}, {1031.93, 1.2, 300},
			{972.54, 2.2, 250}, {949.74, 1.8, 250}, {977.02, 1.6, 220}, {1036.5, 1.6, 220},
		} {
			c.absorb(l.wave, -outflow, l.sigma, l.ew*metal)
		}
		c.absorb(1294.5, 0, 100, 0.4*metal)
		c.absorb(1417.2, 0, 100, 0.4*metal)
		c.absorb(1501.8, 0, 90, 0.4*metal)
		sight.dim(c)
		base := math.Pow(1216.0/1500, slope)
		if lya > 0 {
			c.absorb(1215.67, -outflow, 300, 2.5)
			c.emit(1215.67, 250+lag, 110, lya*0.7*base*(1+c.z))
			c.emit(1215.67, 480+lag, 180, lya*0.3*base*(1+c.z))
		} else {
			c.absorb(1215.67, -outflow/2, 500, 6-lya/2)
		}
		c.emit(1640.42, 30, 120, 0.8*c.at(1650)*(1+c.z))
		c.emit(1666.15, 0, 60, 0.5*c.at(1670)*(1+c.z))
		c.emit(1906.68, 0, 60, 1.1*c.at(1900)*(1+c.z))
		c.emit(1908.73, 0, 60, 0.8*c.at(1900)*(1+c.z))
	}
}
