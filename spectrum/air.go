package spectrum

// airCutoff is the wavelength in Angstrom below which published wavelengths are
// vacuum wavelengths even in lists that give air wavelengths elsewhere: air
// absorbs there, so nobody measures in it. Common practice, no source.
const airCutoff = 2000

// refractivity returns n - 1 of standard air (15 C, 101325 Pa, dry, 450 ppm
// CO2) for a vacuum wavelength in Angstrom, by Ciddor 1996, Applied Optics 35,
// 1566, with s = 1e4/wave in 1/micron:
//
//	n - 1 = 0.05792105/(238.0185 - s^2) + 0.00167917/(57.362 - s^2)
//
// The formula was fitted over 2300-16900 Angstrom and is smooth outside.
func refractivity(wave float64) float64 {
	s := 1e4 / wave
	s2 := s * s
	return 0.05792105/(238.0185-s2) + 0.00167917/(57.362-s2)
}

// VacuumToAir returns the wavelength in standard air of a vacuum wavelength,
// both in Angstrom: wave/n with n of Ciddor 1996. Below 2000 Angstrom the
// wavelength is returned as it is, by the usual convention. NaN gives NaN.
func VacuumToAir(wave float64) float64 {
	if wave < airCutoff {
		return wave
	}
	return wave / (1 + refractivity(wave))
}

// AirToVacuum returns the vacuum wavelength of a wavelength in standard air,
// both in Angstrom. It solves wave = v/n(v), Ciddor 1996, by iterating v =
// wave n(v), which gains five digits a step; the result agrees with
// VacuumToAir to 1e-8 Angstrom over the optical. An air wavelength below 2000
// Angstrom is returned as it is, by the usual convention. NaN gives NaN.
func AirToVacuum(wave float64) float64 {
	if wave < airCutoff {
		return wave
	}
	v := wave
	for range 4 {
		v = wave * (1 + refractivity(v))
	}
	return v
}
