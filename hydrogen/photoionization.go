package hydrogen

import "math"

// LymanLimit is the wavelength of the ionization limit of the hydrogen ground
// state in vacuum Angstrom, 1e8 over the energy of Level(1, 0, 1) in cm^-1.
const LymanLimit = 911.753463

// LymanLimitCrossSection returns the photoionization cross section of the
// hydrogen ground state in cm^2 at the rest wavelength waveRest in vacuum
// Angstrom: exact for a non-relativistic hydrogenic atom (Stobbe 1930;
// Osterbrock & Ferland 2006, equation 2.4),
//
//	sigma = sigma_0 (nu_0/nu)^4 exp(4 - 4 atan(eps)/eps) / (1 - exp(-2 pi/eps)),
//
// eps = sqrt(nu/nu_0 - 1), sigma_0 = 2^9 pi^2 alpha a_0^2/(3 e^4) = 6.304e-18.
// Zero redward of LymanLimit; NaN for NaN or a wavelength that is not positive.
func LymanLimitCrossSection(waveRest float64) float64 {
	if !(waveRest > 0) {
		return math.NaN()
	}
	if waveRest > LymanLimit {
		return 0
	}
	sigma0 := 512 * math.Pi * math.Pi * FineStructure * BohrRadius * BohrRadius * 1e4 / (3 * math.Exp(4))
	x := waveRest / LymanLimit
	eps := math.Sqrt(1/x - 1)
	if eps < 1e-8 {
		return sigma0
	}
	return sigma0 * x * x * x * x * math.Exp(4-4*math.Atan(eps)/eps) / -math.Expm1(-2*math.Pi/eps)
}
