package synth

import (
	"math"
	"math/rand/v2"
	"slices"

	"duskline/spectrum"
)

// resolvingPower of the invented spectrograph, wavelength over FWHM.
const resolvingPower = 1900

// instrumentBlur is the sigma of its profile in km/s.
const instrumentBlur = spectrum.SpeedOfLight / resolvingPower / 2.3548

// Grid on which sources are painted before an arm samples them: fine enough
// that linear interpolation of the narrowest line is good to 2 %.
const (
	sceneStart = 3440.0 // Angstrom
	sceneStep  = 4e-5   // dex
	sceneLen   = 12200  // to 10,583 Angstrom
)

// scene is a painted source: noiseless flux on the fine grid.
type scene struct{ flux []float64 }

// paintScene paints a source at redshift z.
func paintScene(z float64, paint func(c *canvas)) *scene {
	c := &canvas{wave: make([]float64, sceneLen), flux: make([]float64, sceneLen), z: z,
		blur: instrumentBlur}
	for i := range c.wave {
		c.wave[i] = sceneStart * math.Pow(10, sceneStep*float64(i))
	}
	paint(c)
	return &scene{c.flux}
}

// at returns the flux at an observed vacuum wavelength.
func (s *scene) at(wave float64) float64 {
	x := math.Log10(wave/sceneStart) / sceneStep
	i := min(max(int(x), 0), sceneLen-2)
	t := x - float64(i)
	return s.flux[i]*(1-t) + s.flux[i+1]*t
}

// arm is a grid of pixels of one detector.
type arm struct {
	name     string
	wave     []float64 // as the file states it, Angstrom: in air or in vacuum
	detector []float64 // the same in vacuum
	through  []float64 // throughput, one at its best
	sky      []float64 // brightness of the night sky, about one between its lines
	clear    []float64 // trace of the bands of the atmosphere, one where there is none
}

// newArm makes an arm from its wavelengths, taken as air or vacuum. The
// throughput falls to half at lo and hi Angstrom, over about edge Angstrom.
func newArm(name string, wave []float64, medium spectrum.Medium, lo, hi, edge float64) *arm {
	a := &arm{name: name, wave: wave, detector: make([]float64, len(wave)),
		through: make([]float64, len(wave)), clear: make([]float64, len(wave))}
	for i, w := range wave {
		if medium == spectrum.Air {
			w = spectrum.AirToVacuum(w)
		}
		a.detector[i] = w
		a.through[i] = 0.02 + step((w-lo)/edge)*step((hi-w)/edge)
		a.clear[i] = 1
		for _, t := range tellurics {
			a.clear[i] -= t.depth * step((w-t.from)/4) * step((t.to-w)/4)
		}
	}
	c := &canvas{wave: a.detector, flux: make([]float64, len(wave)), blur: instrumentBlur}
	c.fill(func(w float64) float64 { return 0.6 + 0.4*math.Pow(w/6000, 1.5) })
	for _, l := range airglow {
		center := spectrum.AirToVacuum(l.airWave)
		width := center * c.blur / spectrum.SpeedOfLight
		c.emit(center, 0, 0, l.ew*math.Sqrt(2*math.Pi)*width)
	}
	a.sky = c.flux
	return a
}

// pixels is what an arm records of one object.
type pixels struct {
	flux, ivar []float64
	bad        []bool // flagged by the invented reduction; ivar is 0 there
}

// airglow holds lines of the night sky, wavelength in air and brightness relative
// to the continuum of a dark sky: oxygen, sodium and the brighter OH lines
// (Osterbrock et al. 1996, PASP 108, 277; wavelengths from memory, brightness by
// eye).
var airglow = []feature{
	{5577.34, 28}, {5889.95, 3}, {5895.92, 2}, {6300.30, 12}, {6363.78, 4}, {6498.7, 1.5}, {6533.0, 1.5}, {6553.6, 1.2}, {6863.9, 4},
	{6923.2, 4}, {6948.9, 2}, {6978.4, 2}, {7244.9, 3}, {7276.4, 7}, {7316.3, 8}, {7340.9, 9}, {7369.2, 4}, {7401.7, 4}, {7524.0, 2},
	{7571.7, 3}, {7712.0, 4}, {7750.6, 10}, {7794.1, 10}, {7821.5, 9}, {7853.2, 5}, {7913.7, 9}, {7964.7, 10}, {7993.3, 11}, {8025.8, 7},
	{8062.0, 4}, {8298.4, 5}, {8344.6, 12}, {8399.2, 14}, {8430.2, 12}, {8452.3, 6}, {8465.4, 9}, {8493.4, 7}, {8505.0, 5}, {8761.2, 5},
	{8767.9, 8}, {8778.3, 9}, {8791.2, 8}, {8827.1, 16}, {8836.0, 8}, {8867.6, 8}, {8885.9, 16}, {8903.1, 9}, {8919.6, 15}, {8943.4, 12},
	{8958.1, 12}, {8988.4, 7}, {9001.3, 6}, {9038.1, 5}, {9049.2, 5}, {9313.2, 9}, {9337.9, 10}, {9375.9, 16}, {9419.7, 10}, {9439.7, 16},
	{9461.1, 9}, {9476.8, 14}, {9502.8, 14}, {9521.9, 12}, {9552.5, 12}, {9567.6, 12}, {9607.7, 8}, {9620.6, 8}, {9655.0, 7}, {9699.7, 10},
	{9719.8, 11}, {9742.2, 8}, {9791.4, 12}, {9802.4, 10},
}

// tellurics are bands of the atmosphere that a reduction leaves traces of:
// vacuum wavelengths from and to, share of the light taken.
var tellurics = []struct{ from, to, depth float64 }{
	{6869, 6950, 0.25}, {7167, 7320, 0.12}, {7596, 7700, 0.5}, {8130, 8340, 0.12}, {8950, 9250, 0.2}, {9300, 9700, 0.4},
}

// observe records a scene through all arms of an instrument. velocity is that of
// the observer towards the source in km/s, which the wavelengths of the arms do
// not contain. Three quarters of the pixels get a signal-to-noise ratio below
// snr; the median over all pixels is returned. A nil scene is blank sky. The flux
// is in units in which the noise at the best wavelengths is about one.
func observe(r *rand.Rand, arms []*arm, s *scene, velocity, snr float64) (out []pixels, median float64) {
	signal := make([][]float64, len(arms))
	noise := make([][]float64, len(arms))
	var ratios []float64
	warp := [3]float64{0.03 * r.NormFloat64(), 0.03 * r.NormFloat64(), 2 * math.Pi * r.Float64()}
	for k, a := range arms {
		signal[k] = make([]float64, len(a.wave))
		noise[k] = make([]float64, len(a.wave))
		for i, w := range a.detector {
			noise[k][i] = math.Sqrt((a.sky[i]+0.5/a.through[i])/a.through[i]) / a.clear[i]
			if s == nil {
				continue
			}
			x := (w - 6700) / 3100
			signal[k][i] = s.at(w*(1+velocity/spectrum.SpeedOfLight)) * (1 + warp[0]*x + warp[1]*math.Sin(3*x+warp[2]))
			ratios = append(ratios, signal[k][i]/noise[k][i])
		}
	}
	bright := 0.0
	if s != nil {
		slices.Sort(ratios)
		bright = snr / ratios[3*len(ratios)/4]
		median = bright * ratios[len(ratios)/2]
	}
	for k, a := range arms {
		out = append(out, a.expose(r, signal[k], noise[k], bright))
	}
	return out, median
}

// expose draws one exposure of an arm.
func (a *arm) expose(r *rand.Rand, signal, noise []float64, bright float64) pixels {
	n := len(signal)
	p := pixels{flux: make([]float64, n), ivar: make([]float64, n), bad: make([]bool, n)}
	leftover := 0.012 * r.NormFloat64() // share of the sky lines not taken out
	trace := 0.03 * r.NormFloat64()     // error of the correction for the atmosphere
	for i := range signal {
		f := bright * signal[i]
		// The source's own photons matter where it is brighter than the sky.
		sigma := noise[i] * math.Sqrt(1+0.02*math.Max(f, 0)/noise[i])
		f *= 1 - (1-a.clear[i])*trace
		p.flux[i] = f + sigma*r.NormFloat64() + leftover*(a.sky[i]-1)
		p.ivar[i] = 1 / (sigma * sigma)
	}
	p.damage(r)
	return p
}

// damage adds cosmic rays and dead columns.
func (p *pixels) damage(r *rand.Rand) {
	n := len(p.flux)
	for range r.IntN(1 + n/700) {
		// The reduction finds most hits; what it leaves is fainter.
		i, length, height := r.IntN(n), 1+r.IntN(3), 10+60*r.ExpFloat64()
		found := r.Float64() < 0.92
		if !found {
			length, height = 1+r.IntN(2), 6+12*r.ExpFloat64()
		}
		for k := i; k < min(i+length, n); k++ {
			p.flux[k] += height / math.Sqrt(p.ivar[k])
			p.bad[k] = p.bad[k] || found
		}
	}
	for range 1 + r.IntN(2+n/900) {
		i, length := r.IntN(n), 1+r.IntN(12)
		for k := i; k < min(i+length, n); k++ {
			p.bad[k] = true
		}
	}
	for k, bad := range p.bad {
		if bad {
			p.ivar[k] = 0
			if r.Float64() < 0.1 {
				p.flux[k] = math.NaN()
			}
		}
	}
}
