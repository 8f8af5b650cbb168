package fitsread

import (
	"math"
	"regexp"
	"strconv"
	"strings"
)

// quantity is what the numbers on a spectral axis measure.
type quantity int

const (
	wavelength quantity = iota
	frequency
	energy
	wavenumber
	redshiftAxis  // (lambda - lambda0) / lambda0, from RESTWAV or RESTFRQ
	opticalSpeed  // c (lambda - lambda0) / lambda0
	radioSpeed    // c (nu0 - nu) / nu0
	apparentSpeed // relativistic radial velocity
	betaSpeed     // the same over c
)

// scale says whether numbers are given themselves or as logarithms.
type scale int

const (
	linear scale = iota
	log10
	ln
)

// Exact SI values (2019): speed of light in m/s, Planck constant in J s, joule
// per electron volt.
const (
	lightSpeed = 299792458.0
	planck     = 6.62607015e-34
	joulePerEV = 1.602176634e-19
	angstrom   = 1e-10 // m
)

// spectralUnit is a unit of a spectral axis: a quantity and the factor to its
// SI unit (m, Hz, J, 1/m, m/s).
type spectralUnit struct {
	quantity quantity
	factor   float64
	scale    scale
}

var unitAngstrom = spectralUnit{wavelength, angstrom, linear}

var unitNames = map[string]spectralUnit{
	"m": {wavelength, 1, linear}, "meter": {wavelength, 1, linear}, "metre": {wavelength, 1, linear},
	"cm": {wavelength, 1e-2, linear}, "mm": {wavelength, 1e-3, linear},
	"um": {wavelength, 1e-6, linear}, "micron": {wavelength, 1e-6, linear}, "mum": {wavelength, 1e-6, linear},
	"micrometer": {wavelength, 1e-6, linear}, "micrometre": {wavelength, 1e-6, linear}, "µm": {wavelength, 1e-6, linear},
	"nm": {wavelength, 1e-9, linear}, "nanometer": {wavelength, 1e-9, linear}, "nanometre": {wavelength, 1e-9, linear},
	"a": unitAngstrom, "aa": unitAngstrom, "ang": unitAngstrom, "angstrom": unitAngstrom, "angstroem": unitAngstrom,
	"å": unitAngstrom, "0.1nm": unitAngstrom, "pm": {wavelength, 1e-12, linear},
	"hz": {frequency, 1, linear}, "khz": {frequency, 1e3, linear}, "mhz": {frequency, 1e6, linear},
	"ghz": {frequency, 1e9, linear}, "thz": {frequency, 1e12, linear}, "s-1": {frequency, 1, linear},
	"j": {energy, 1, linear}, "erg": {energy, 1e-7, linear}, "ev": {energy, joulePerEV, linear},
	"kev": {energy, 1e3 * joulePerEV, linear}, "mev": {energy, 1e6 * joulePerEV, linear},
	"m-1": {wavenumber, 1, linear}, "1/m": {wavenumber, 1, linear},
	"cm-1": {wavenumber, 1e2, linear}, "1/cm": {wavenumber, 1e2, linear}, "/cm": {wavenumber, 1e2, linear},
	"um-1": {wavenumber, 1e6, linear}, "1/um": {wavenumber, 1e6, linear}, "kayser": {wavenumber, 1e2, linear},
	"m/s": {apparentSpeed, 1, linear}, "ms-1": {apparentSpeed, 1, linear},
	"km/s": {apparentSpeed, 1e3, linear}, "kms-1": {apparentSpeed, 1e3, linear},
}

// parseUnit reads the unit of a spectral axis, also as log10(unit), log(unit),
// dex(unit) or ln(unit), with plural s, carets and stars left out.
func parseUnit(s string) (spectralUnit, bool) {
	s = strings.ToLower(strings.TrimSpace(s))
	mode := linear
	for _, p := range []struct {
		prefix string
		scale  scale
	}{{"log10", log10}, {"log", log10}, {"lg", log10}, {"dex", log10}, {"ln", ln}} {
		if rest, ok := strings.CutPrefix(s, p.prefix); ok {
			s, mode = strings.Trim(rest, " ()[]_"), p.scale
			break
		}
	}
	power := 1.0
	if m := powerOfTen.FindStringSubmatch(s); m != nil {
		k, err := strconv.Atoi(m[1] + m[2])
		if err != nil || k < -40 || k > 40 {
			return spectralUnit{}, false
		}
		power, s = math.Pow10(k), m[3]
	}
	s = strings.NewReplacer(" ", "", "^", "", "*", "", "{", "", "}", "", "[", "", "]", "").Replace(s)
	u, ok := unitNames[s]
	if !ok {
		u, ok = unitNames[strings.TrimSuffix(s, "s")]
	}
	if s == "" && mode != linear {
		u, ok = unitAngstrom, true // "log" alone: the wavelengths' usual unit
	}
	u.scale = mode
	u.factor *= power
	return u, ok
}

// powerOfTen is a multiplier before a unit: 10**k, 10^k or 10 and a signed k, with
// or without parentheses (FITS standard 4.0, section 4.3.1).
var powerOfTen = regexp.MustCompile(`^10(?:(?:\*\*|\^)\s*\(?\s*([+-]?\d+)\s*\)?|([+-]\d+))\s*\.?\s*(.+)$`)

// guessUnit chooses a unit for wavelengths that come without one: by common
// practice (no source) lists below 30 are micron, spectra from 200 to 3000 that
// begin below 800 are nm, tiny numbers are meters, all others Angstrom.
func guessUnit(lo, hi float64) (spectralUnit, string) {
	switch {
	case hi < 1e-2:
		return spectralUnit{wavelength, 1, linear}, "m"
	case hi < 30:
		return spectralUnit{wavelength, 1e-6, linear}, "micron"
	case lo >= 200 && lo < 800 && hi <= 3000:
		return spectralUnit{wavelength, 1e-9, linear}, "nm"
	}
	return unitAngstrom, "Angstrom"
}

// toAngstrom converts values of the axis in place. rest is the rest wavelength
// in m for velocities and redshifts. Values without a wavelength become NaN.
func (u spectralUnit) toAngstrom(v []float64, rest float64) {
	k := u.factor / angstrom
	switch {
	case u.scale == log10:
		for i, x := range v {
			v[i] = math.Exp(x * math.Ln10)
		}
	case u.scale == ln:
		for i, x := range v {
			v[i] = math.Exp(x)
		}
	}
	if u.quantity == wavelength {
		if math.Abs(k-1) > 1e-12 {
			for i := range v {
				v[i] *= k
			}
		}
		return
	}
	for i, x := range v {
		w := wavelengthOf(u.quantity, x*u.factor, rest) / angstrom
		if !(w > 0) || math.IsInf(w, 0) {
			w = math.NaN()
		}
		v[i] = w
	}
}

// wavelengthOf converts a value in SI units to a wavelength in m; rest in m.
// Definitions: FITS Paper III (Greisen et al. 2006, A&A 446, 747), table 1.
func wavelengthOf(q quantity, x, rest float64) float64 {
	switch q {
	case frequency:
		return lightSpeed / x
	case energy:
		return planck * lightSpeed / x
	case wavenumber:
		return 1 / x
	case redshiftAxis:
		return rest * (1 + x)
	case opticalSpeed:
		return rest * (1 + x/lightSpeed)
	case radioSpeed:
		return rest / (1 - x/lightSpeed)
	case betaSpeed:
		return rest * math.Sqrt((1+x)/(1-x))
	case apparentSpeed:
		return rest * math.Sqrt((1+x/lightSpeed)/(1-x/lightSpeed))
	}
	return x
}

// valueOf is the inverse of wavelengthOf.
func valueOf(q quantity, w, rest float64) float64 {
	r := w / rest
	switch q {
	case frequency:
		return lightSpeed / w
	case energy:
		return planck * lightSpeed / w
	case wavenumber:
		return 1 / w
	case redshiftAxis:
		return r - 1
	case opticalSpeed:
		return lightSpeed * (r - 1)
	case radioSpeed:
		return lightSpeed * (1 - 1/r)
	case betaSpeed:
		return (r*r - 1) / (r*r + 1)
	case apparentSpeed:
		return lightSpeed * (r*r - 1) / (r*r + 1)
	}
	return w
}
