package hydrogen

import (
	"fmt"
	"math"
)

// BalmerAtmosphere gives the depths of the Balmer lines and of the Balmer jump in the light of a
// star, from the simplest atmosphere that has their shapes right:
//
//   - The temperature is that of a gray atmosphere in Eddington's approximation,
//     T^4 = 3/4 T_eff^4 (tau + 2/3), tau being the mean optical depth (Mihalas 1978, from memory).
//   - The density of electrons is proportional to the optical depth: hydrostatic
//     equilibrium of an ionized gas whose absorption a gram does not change with depth.
//   - The light at a wavelength comes from where its own optical depth is 2/3 (Eddington-Barbier; Mihalas 1978).
//   - The continuum absorbs as the square of the wavelength and as the mean does at 5500
//     Angstrom. Absorption by hydrogen goes as its cube (Kramers 1923), scattering by
//     electrons and absorption by H- hardly change; the square is between them, by trial on open flux standards.
//
// Lines and jump follow from balmerGas. Population by the local temperature is assumed, so that
// strong lines end at the temperature of the surface; real cores are deeper.
type BalmerAtmosphere struct {
	gas      *balmerGas
	tempK    float64
	strength float64
}

const (
	meanWave = 5500.0 // Angstrom
	lightAt  = 2.0 / 3
)

// NewBalmerAtmosphere returns the atmosphere of the effective temperature tempK in K with the
// electron density ne in cm^-3 where the continuum comes from; strength is the absorption of the
// Balmer continuum at its limit over the other absorption there; last is the upper level of the
// last line.
//
// It is an error unless ne is 1e9 to 1e19, tempK 2000 to 200000, strength 1e-4 to 1e4, and last
// 3 to 20.
func NewBalmerAtmosphere(ne, tempK, strength float64, last int) (*BalmerAtmosphere, error) {
	for _, q := range []struct {
		name               string
		value, least, most float64
	}{{"density", ne, 1e9, 1e19}, {"temperature", tempK, 2000, 200000}, {"strength", strength, 1e-4, 1e4}} {
		if !(q.value >= q.least && q.value <= q.most) {
			return nil, fmt.Errorf("%s = %g, want %g to %g", q.name, q.value, q.least, q.most)
		}
	}
	if last < 3 || last > maxStark {
		return nil, fmt.Errorf("upper = %d, want 3 to %d", last, maxStark)
	}
	var layers [gasLayers]float64
	for k := range layers {
		// Of the middle.
		layers[k] = ne * 0.5 * (layerBottom(k-1) + layerBottom(k)) / lightAt
	}
	gas, err := newBalmerGas(&layers, tempK, last)
	if err != nil {
		return nil, err
	}
	return &BalmerAtmosphere{gas, tempK, strength}, nil
}

// layerBottom is the optical depth of the continuum at the bottom of a layer: each is as thick
// as all above it.
func layerBottom(k int) float64 {
	if k < 0 {
		return 0
	}
	return math.Ldexp(lightAt, k+1-gasLayers)
}

// Lines returns by how much of the continuum the light at a wavelength in vacuum Angstrom is
// darker because of the Balmer lines. NaN unless wave is positive.
func (a *BalmerAtmosphere) Lines(wave float64) float64 {
	if !(wave > 0) {
		return math.NaN()
	}
	l := a.gas.linesAt(wave)
	return a.depth(wave, &l)
}

// Jump returns by how much more it is darker because of the Balmer continuum and the levels
// dissolved into it. NaN unless wave is positive.
func (a *BalmerAtmosphere) Jump(wave float64) float64 {
	if !(wave > 0) {
		return math.NaN()
	}
	l, c := a.gas.linesAt(wave), a.gas.continuumAt(wave)
	for k := range c {
		c[k] += l[k]
	}
	return a.depth(wave, &c) - a.depth(wave, &l)
}

// depth returns how much darker the light is with so much absorption in the layers, in units of
// that of the Balmer continuum at its limit.
func (a *BalmerAtmosphere) depth(wave float64, opacity *[gasLayers]float64) float64 {
	q := BalmerLimit / wave
	scale := a.strength * q * q
	sum, top := 0.0, 0.0
	for k, o := range opacity {
		bottom := layerBottom(k)
		d := (1 + scale*o) * (bottom - top)
		if sum+d > lightAt {
			return 1 - a.brightness(wave, top+(lightAt-sum)/(1+scale*o))/a.brightness(wave, lightAt)
		}
		sum, top = sum+d, bottom
	}
	return 0
}

// brightness is the Planck function, up to a factor, at an optical depth of the continuum at the
// wavelength.
func (a *BalmerAtmosphere) brightness(wave, tau float64) float64 {
	q := wave / meanWave
	t := a.tempK * math.Sqrt(math.Sqrt(0.75*(tau/(q*q)+2.0/3)))
	return 1 / math.Expm1(Planck*SpeedOfLight/(wave*1e-10*Boltzmann*t))
}
