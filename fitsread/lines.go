package fitsread

import (
	"fmt"
	"math"
	"strings"
)

// maxGuessLines is the height up to which an image without words may hold one
// object's flux and errors rather than an object a line.
const maxGuessLines = 6

// lineRoles reads what the n lines, or planes of lines, of an image mean from
// cards: one card a line (ARRAY1, ROW2, BANDID3, ...), or one card that lists a
// word for every line, beginning with the flux. nil when the header does not say.
func lineRoles(h *hdu, n int) []role {
	if n < 2 || n > 64 {
		return nil
	}
	for _, stem := range []string{"ARRAY", "ROW", "LINE", "BANDID", "BAND", "PLANE", "CHANNEL", "AXIS"} {
		roles, found := make([]role, n), false
		for i := range roles {
			c, ok := h.header.find(fmt.Sprintf("%s%d", stem, i+1))
			if !ok || !c.isString() {
				continue
			}
			roles[i] = roleInWords(c.value())
			found = found || roles[i] == roleFlux
		}
		if found {
			return roles
		}
	}
	for _, c := range h.header {
		if !c.isString() {
			continue
		}
		words := strings.FieldsFunc(c.value(), func(r rune) bool { return strings.ContainsRune(" ,;/|", r) })
		if len(words) != n || roleInWords(words[0]) != roleFlux {
			continue
		}
		roles := make([]role, n)
		for i, w := range words {
			roles[i] = roleInWords(w)
		}
		return roles
	}
	return nil
}

// roleInWords reads a line's role from a phrase such as "CONTINUUM-SUBTRACTED
// SPECTRUM": what is derived from the flux is not the flux.
func roleInWords(s string) role {
	t, _, _ := strings.Cut(strings.ToLower(s), " - ") // what follows tells how it was made
	switch {
	case hasAny(t, "inverse", "ivar", "invvar"):
		return roleIvar
	case hasAny(t, "mask", "flag", "quality"):
		return roleMask
	case hasAny(t, "variance"):
		return roleVariance
	case hasAny(t, "error", "sigma", "noise", "uncert", "stddev"):
		return roleSigma
	case hasAny(t, "continuum", "subtracted", "background", "sky", "raw", "model", "smooth"):
		return roleNone
	case hasAny(t, "wavelength", "lambda", "loglam"):
		return roleWave
	case hasAny(t, "flux", "spectrum", "signal", "intensity"):
		return roleFlux
	}
	return roleNone
}

// guessLines tells lines apart by their numbers: a first line that runs in order
// is the wavelength; a line after the flux that is nowhere negative and fits the
// flux's own scatter within a factor 3, read as sigma, variance or inverse
// variance, is the weight. nil when no line is a weight or wavelength: then every
// line may be a spectrum.
func (f *File) guessLines(h *hdu) ([]role, error) {
	n := int(h.lines())
	roles := make([]role, n)
	flux, found := 0, false
	first, err := f.imageLine(h, 0, h.pixels())
	if err != nil {
		return nil, err
	}
	if monotonic(first) && n > 1 {
		roles[0], flux, found = roleWave, 1, true
		if first, err = f.imageLine(h, h.pixels(), h.pixels()); err != nil {
			return nil, err
		}
	}
	roles[flux] = roleFlux
	s := scatter(first)
	for i := flux + 1; i < n && s > 0; i++ {
		v, err := f.imageLine(h, int64(i)*h.pixels(), h.pixels())
		if err != nil {
			return nil, err
		}
		if !nonNegative(v) {
			continue
		}
		if r, off := weightByScatter(medianPositive(v), s); off < math.Log(3) {
			roles[i] = r
			return roles, nil
		}
	}
	if !found {
		return nil, nil
	}
	return roles, nil
}

// weightByScatter chooses what a typical weight value w is for flux that
// scatters by s: the reading that comes nearest, and how far off it is in ln.
func weightByScatter(w, s float64) (role, float64) {
	best, off := roleSigma, math.Abs(math.Log(w/s))
	if d := math.Abs(math.Log(math.Sqrt(w) / s)); d < off {
		best, off = roleVariance, d
	}
	if d := math.Abs(math.Log(1 / math.Sqrt(w) / s)); d < off {
		best, off = roleIvar, d
	}
	return best, off
}
