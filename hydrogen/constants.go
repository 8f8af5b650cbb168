// Package hydrogen computes the spectrum of the hydrogen atom: levels with fine
// structure, wavelengths, oscillator strengths, decay rates, the Voigt profile
// with the optical depths and equivalent widths made from it, recombination line
// ratios, pressure-broadened Balmer lines and those of a simple stellar atmosphere,
// and the mean transmission of the intergalactic medium in the Lyman series and
// continuum.
//
// Wavelengths are vacuum Angstrom, velocities km/s, column densities cm^-2,
// rates s^-1. Everything is pure and safe for concurrent use; tables are built
// once, at first use. Hyperfine structure is averaged over throughout.
package hydrogen

// Fundamental constants in SI units: CODATA 2022 recommended values (Mohr,
// Newell, Taylor & Tiesinga 2025). The comment gives the standard uncertainty.
const (
	SpeedOfLight     = 299792458.0     // m/s, exact
	Planck           = 6.62607015e-34  // J s, exact
	ElementaryCharge = 1.602176634e-19 // C, exact
	Boltzmann        = 1.380649e-23    // J/K, exact

	RydbergInfinity     = 10973731.568157   // m^-1, 0.000012
	FineStructure       = 7.2973525643e-3   // 1.1e-12
	ElectronMass        = 9.1093837139e-31  // kg, 2.8e-40
	ProtonElectronRatio = 1836.152673426    // 3.2e-8
	BohrRadius          = 5.29177210544e-11 // m, 8.2e-21
	ElectronRadius      = 2.8179403205e-15  // m, 1.3e-24, classical
	ProtonRadius        = 8.4075e-16        // m, 6.4e-19, rms charge
)

// RydbergHydrogen is R_inf/(1 + m_e/m_p), in m^-1.
const RydbergHydrogen = RydbergInfinity / (1 + 1/ProtonElectronRatio)

// massFactor turns an oscillator strength of a nucleus of infinite mass into
// that of 1H (Wiese & Fuhr 2009, section 2).
const massFactor = 1 + 1/ProtonElectronRatio
