package lines

// Band is a range of observed vacuum wavelength, Angstrom.
type Band struct{ Lo, Hi float64 }

// onSky reports whether [lo, hi] touches one of the bands.
func onSky(bands []Band, lo, hi float64) bool {
	for _, b := range bands {
		if lo <= b.Hi && hi >= b.Lo {
			return true
		}
	}
	return false
}
