package lines

// Band is a range of observed vacuum wavelength, Angstrom.
type Band struct{ Lo, Hi float64 }

// SkyBands returns the strongest night-sky lines and telluric bands of the
// optical, as vacuum wavelengths of the observer, widened by 1 Angstrom for the
// barycentric correction. Wavelengths from memory; which of them matter is
// common practice, no source.
func SkyBands() []Band {
	return []Band{
		{5577.9, 5579.9},   // [O I]
		{5890.5, 5898.6},   // Na I D
		{6301.0, 6303.1},   // [O I]
		{6364.5, 6366.6},   // [O I]
		{6867.0, 6946.0},   // O2 B band
		{7164.0, 7342.0},   // H2O
		{7594.0, 7702.0},   // O2 A band
		{8127.0, 8348.0},   // H2O
		{8946.0, 9850.0},   // H2O
		{13450.0, 14400.0}, // H2O
		{18000.0, 19500.0}, // H2O
	}
}

// onSky reports whether [lo, hi] touches one of the bands.
func onSky(bands []Band, lo, hi float64) bool {
	for _, b := range bands {
		if lo <= b.Hi && hi >= b.Lo {
			return true
		}
	}
	return false
}
