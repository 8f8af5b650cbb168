package synth

import (
	"math"
	"sort"

	"duskline/spectrum"
)

// canvas is a spectrum being painted: flux per unit wavelength at increasing
// observed vacuum wavelengths in Angstrom, barycentric, without noise. Widths
// given to its methods are intrinsic; blur adds the instrument's in quadrature.
type canvas struct {
	wave, flux []float64
	z          float64
	blur       float64 // instrument's profile, sigma in km/s
}

// rest returns the wavelength of pixel i in the source's frame.
func (c *canvas) rest(i int) float64 { return c.wave[i] / (1 + c.z) }

// fill sets the flux to f(rest wavelength).
func (c *canvas) fill(f func(rest float64) float64) {
	for i := range c.flux {
		c.flux[i] = f(c.rest(i))
	}
}

// window returns the pixels from lo to hi Angstrom, observed.
func (c *canvas) window(lo, hi float64) (first, end int) {
	return sort.SearchFloat64s(c.wave, lo), sort.SearchFloat64s(c.wave, hi)
}

// near calls paint for the pixels within five sigma of a line at rest
// wavelength wave moved by velocity (km/s), with the distance in sigmas. sigma
// is the intrinsic width in km/s; paint also gets the observed sigma in
// Angstrom.
func (c *canvas) near(wave, velocity, sigma float64, paint func(i int, x, width float64)) {
	center := wave * (1 + c.z) * (1 + velocity/spectrum.SpeedOfLight)
	width := center * math.Hypot(sigma, c.blur) / spectrum.SpeedOfLight
	first, end := c.window(center-5*width, center+5*width)
	for i := first; i < end; i++ {
		paint(i, (c.wave[i]-center)/width, width)
	}
}

// emit adds a Gaussian emission line of the given observed flux.
func (c *canvas) emit(wave, velocity, sigma, flux float64) {
	c.near(wave, velocity, sigma, func(i int, x, width float64) {
		c.flux[i] += flux / (math.Sqrt(2*math.Pi) * width) * math.Exp(-x*x/2)
	})
}

// absorb multiplies in a Gaussian absorption line of rest-frame equivalent
// width ew in Angstrom. Lines that would go below 5 % of the continuum are cut
// there, so a strong one comes out weaker than asked for.
func (c *canvas) absorb(wave, velocity, sigma, ew float64) {
	c.near(wave, velocity, sigma, func(i int, x, width float64) {
		depth := math.Min(ew*(1+c.z)/(math.Sqrt(2*math.Pi)*width), 0.95)
		c.flux[i] *= 1 - depth*math.Exp(-x*x/2)
	})
}

// wings multiplies in a pressure-broadened line: optical depth t0/(1 +
// (x/w)^2.5) with x in Angstrom from the rest wavelength, the fall-off of the
// linear Stark effect (Holtsmark 1919).
func (c *canvas) wings(wave, velocity, t0, w float64) {
	center := wave * (1 + c.z) * (1 + velocity/spectrum.SpeedOfLight)
	w *= 1 + c.z
	soft := center * c.blur / spectrum.SpeedOfLight
	first, end := c.window(center-40*w, center+40*w)
	for i := first; i < end; i++ {
		x := math.Hypot(c.wave[i]-center, soft) / w
		c.flux[i] *= math.Exp(-t0 / (1 + math.Pow(x, 2.5)))
	}
}

// band multiplies in a molecular band: a sharp head at rest wavelength head and
// a tail of length tail Angstrom to the red.
func (c *canvas) band(head, depth, tail float64) {
	edge := head * c.blur / spectrum.SpeedOfLight
	first, end := c.window((head-6*edge)*(1+c.z), (head+6*tail)*(1+c.z))
	for i := first; i < end; i++ {
		x := c.rest(i) - head
		c.flux[i] *= 1 - depth*step(x/edge)*math.Exp(-math.Max(x, 0)/tail)
	}
}

// at returns the flux at a rest wavelength, interpolated; the value at the end
// outside.
func (c *canvas) at(rest float64) float64 {
	x := rest * (1 + c.z)
	i := sort.SearchFloat64s(c.wave, x)
	if i == 0 {
		return c.flux[0]
	}
	if i == len(c.wave) {
		return c.flux[i-1]
	}
	t := (x - c.wave[i-1]) / (c.wave[i] - c.wave[i-1])
	return c.flux[i-1] + t*(c.flux[i]-c.flux[i-1])
}

// step rises smoothly from 0 to 1 around x = 0.
func step(x float64) float64 { return 1 / (1 + math.Exp(-x)) }

// planck returns the shape of a blackbody of temperature kelvin per unit
// wavelength, one at 5500 Angstrom. The second radiation constant is 1.4388e8
// Angstrom K (CODATA).
func planck(wave, kelvin float64) float64 {
	const c2 = 1.438776877e8
	x := 5500 / wave
	return math.Pow(x, 5) * math.Expm1(c2/(5500*kelvin)) / math.Expm1(c2/(wave*kelvin))
}
