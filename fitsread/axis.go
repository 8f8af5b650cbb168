package fitsread

import (
	"fmt"
	"math"
	"strings"

	"duskline/spectrum"
)

// axis is a spectral coordinate axis as header cards give it, FITS Paper III
// (Greisen et al. 2006) and the older conventions for logarithmic axes.
type axis struct {
	code      string  // first four letters of CTYPE, "" for none of the standard
	algorithm string  // what follows the dash: "", "LOG", "F2W", ...
	value     float64 // CRVAL
	step      float64 // CDELT or CD
	pixel     float64 // CRPIX, counted from 1
	unit      spectralUnit
	unitKnown bool
	rest      float64 // rest wavelength in vacuum, m; NaN when not given
	guessed   string  // what had to be guessed, "" for nothing
	number    int     // of the axis in the header, from 1
	alt       string  // letter of the alternate description, "" for the primary one
}

var axisCodes = map[string]quantity{
	"WAVE": wavelength, "AWAV": wavelength, "FREQ": frequency, "ENER": energy, "WAVN": wavenumber,
	"VRAD": radioSpeed, "VOPT": opticalSpeed, "ZOPT": redshiftAxis, "VELO": apparentSpeed, "BETA": betaSpeed,
	"FELO": opticalSpeed,
}

// readAxis reads the spectral axis on image axis n (from 1) of a header: the
// primary description, or the first alternate one (CTYPEna and so on, FITS
// standard 4.0, section 8.2.1) that names a spectral coordinate where the primary
// one does not. ok is false when the cards describe none.
func readAxis(h header, n int) (a axis, ok bool, err error) {
	a, ok, err = readAxisCards(h, n, "")
	if ok && err == nil && a.code != "" {
		return a, ok, err
	}
	stem := fmt.Sprintf("CTYPE%d", n)
	for i := range h {
		alt, found := strings.CutPrefix(h[i].key, stem)
		if !found || len(alt) != 1 || alt[0] < 'A' || alt[0] > 'Z' {
			continue
		}
		if b, okAlt, errAlt := readAxisCards(h, n, alt); okAlt && errAlt == nil && b.code != "" {
			return b, true, nil
		}
	}
	return a, ok, err
}

func readAxisCards(h header, n int, alt string) (a axis, ok bool, err error) {
	key := func(stem string) string { return fmt.Sprintf("%s%d%s", stem, n, alt) }
	a = axis{pixel: 1, rest: math.NaN(), unit: unitAngstrom, number: n, alt: alt}
	ctype := strings.ToUpper(h.text(key("CTYPE")))
	a.code, a.algorithm = splitType(ctype)
	if unit, known := parseUnit(h.text(key("CUNIT"))); known {
		a.unit, a.unitKnown = unit, true
	}
	if q, standard := axisCodes[a.code]; standard {
		if !a.unitKnown || a.unit.scale == linear {
			a.unit = siUnit(q, a.unit, a.unitKnown)
		}
		a.unitKnown = true
		a.pixel = 0 // the standard's own default
	} else {
		a.code, a.algorithm = "", ""
	}
	if v, ok := h.number(key("CRPIX")); ok {
		a.pixel = v
	} else if _, standard := axisCodes[a.code]; !standard {
		a.pixel = 1
	}
	if w, ok := h.number("RESTWAV" + alt); ok && w > 0 {
		a.rest = w
	} else if nu, ok := h.number("RESTFRQ" + alt); ok && nu > 0 {
		a.rest = lightSpeed / nu
	} else if nu, ok := h.number("RESTFREQ"); ok && nu > 0 {
		a.rest = lightSpeed / nu
	}
	if c0, ok0 := h.number("COEFF0"); ok0 && a.code == "" && alt == "" {
		if c1, ok1 := h.number("COEFF1"); ok1 && c1 != 0 {
			a.value, a.step, a.pixel = c0, c1, 1
			a.unit, a.unitKnown = spectralUnit{wavelength, angstrom, log10}, true
			return a, true, nil
		}
	}
	var okValue, okStep bool
	a.value, okValue = h.number(key("CRVAL"))
	if a.step, okStep = h.number(fmt.Sprintf("CD%d_%d%s", n, n, alt)); !okStep || a.step == 0 {
		a.step, okStep = h.number(key("CDELT"))
		if pc, ok := h.number(fmt.Sprintf("PC%d_%d%s", n, n, alt)); ok {
			a.step *= pc
		}
	}
	if !okValue || !okStep || a.step == 0 || notSpectral(ctype) {
		return axis{}, false, nil
	}
	if a.code == "" {
		a.readOldCards(h, ctype, n)
		return a, true, nil
	}
	return a, true, a.check()
}

func splitType(ctype string) (code, algorithm string) {
	if i := strings.IndexByte(ctype, '-'); i > 0 {
		return ctype[:i], strings.Trim(ctype[i:], "- ")
	}
	return ctype, ""
}

// notSpectral names axes that are certainly something else.
func notSpectral(ctype string) bool {
	for _, p := range []string{"RA--", "DEC-", "GLON", "GLAT", "ELON", "ELAT", "PIXEL", "STOKES", "MULTISPE", "TIME", "UTC", "XPOS", "YPOS"} {
		if strings.HasPrefix(ctype, p) {
			return true
		}
	}
	return false
}

// siUnit is the unit of a standard axis: as CUNIT says, else SI.
func siUnit(q quantity, u spectralUnit, known bool) spectralUnit {
	isSpeed := q == opticalSpeed || q == radioSpeed || q == apparentSpeed
	if !known || u.quantity != q && !(isSpeed && u.quantity == apparentSpeed) {
		return spectralUnit{q, 1, linear}
	}
	u.quantity = q
	return u
}

// readOldCards settles unit and scale of an axis without a standard CTYPE.
// DC-FLAG = 1 and words in CTYPE or CUNIT say log10; failing these, a start of
// 2 to 6 with steps below 0.01 can only be log10 of Angstrom, and one of 6 to 12
// without a unit a natural logarithm (common practice, no source).
func (a *axis) readOldCards(h header, ctype string, n int) {
	if words := h.text(fmt.Sprintf("WAT%d_001", n)); !a.unitKnown && words != "" {
		for _, w := range strings.Fields(words) {
			if u, ok := strings.CutPrefix(w, "units="); ok {
				a.unit, a.unitKnown = unitOr(u, a.unit)
			}
		}
	}
	flag, _ := h.number("DC-FLAG")
	fit := strings.ToUpper(h.text("WFITTYPE"))
	end := a.value
	switch {
	case a.unitKnown && a.unit.scale != linear:
	case flag == 1 || strings.HasPrefix(fit, "LOG") || strings.Contains(ctype, "LOG"):
		a.unit = spectralUnit{wavelength, a.unit.factor, log10}
		a.unitKnown = true
		if strings.Contains(ctype, "LOGN") || strings.HasPrefix(ctype, "LN") {
			a.unit.scale = ln
		}
	case end > 2 && end < 6 && math.Abs(a.step) < 0.01:
		a.unit, a.unitKnown = spectralUnit{wavelength, angstrom, log10}, true
		a.guessed = "the axis is taken for log10 of Angstrom by its numbers"
	case end >= 6 && end < 12 && math.Abs(a.step) < 0.01 && !a.unitKnown:
		a.unit, a.unitKnown = spectralUnit{wavelength, angstrom, ln}, true
		a.guessed = "the axis is taken for ln of Angstrom by its numbers"
	}
}

func unitOr(s string, u spectralUnit) (spectralUnit, bool) {
	if got, ok := parseUnit(s); ok {
		return got, true
	}
	return u, false
}

// check refuses what cannot be computed.
func (a *axis) check() error {
	switch {
	case a.needsRest() && !(a.rest > 0):
		return fmt.Errorf("CTYPE %s needs RESTWAV or RESTFRQ, which the header lacks", a.code)
	case a.algorithm == "" || a.algorithm == "LOG" || a.algorithm == "TAB":
		return nil
	case len(a.algorithm) == 3 && a.algorithm[1] == '2' && strings.IndexByte("FWVA", a.algorithm[0]) >= 0:
		if a.algorithm[0] == 'V' && !(a.rest > 0) {
			return fmt.Errorf("CTYPE %s-%s needs RESTWAV or RESTFRQ, which the header lacks", a.code, a.algorithm)
		}
		return nil
	}
	return fmt.Errorf("the axis algorithm -%s is not supported", a.algorithm)
}

func (a *axis) needsRest() bool { return a.unit.quantity >= redshiftAxis }

// isAir reports whether the axis itself is in air wavelengths. Of AWAV-F2A and
// its kin only the reference value is: the pixels lie on a vacuum axis.
func (a *axis) isAir() bool {
	return a.code == "AWAV" && (a.algorithm == "" || a.algorithm == "LOG" || a.algorithm[0] == 'A')
}

// medium returns what the axis states about air or vacuum.
func (a *axis) medium() (m spectrum.Medium, stated bool) {
	if a.code == "" {
		return spectrum.Vacuum, false
	}
	if a.isAir() {
		return spectrum.Air, true
	}
	return spectrum.Vacuum, true
}

// wavelengths returns n wavelengths in the axis's unit before toAngstrom for
// plain axes, and in m for the standard's non-linear ones; inMeters says which.
//
// Linear: S = S_r + w with w = CDELT (p - CRPIX). LOG: S = S_r exp(w/S_r). X2P:
// the pixels are uniform in X: X = X_r + w dX/dS at S_r (Paper III, equations 2-12).
func (a *axis) wavelengths(n int) (v []float64, inMeters bool) {
	v = make([]float64, n)
	switch {
	case a.algorithm == "":
		for i := range v {
			v[i] = a.value + a.step*(float64(i+1)-a.pixel)
		}
		return v, false
	case a.algorithm == "LOG":
		for i := range v {
			v[i] = a.value * math.Exp(a.step*(float64(i+1)-a.pixel)/a.value)
		}
		return v, false
	}
	q := map[byte]quantity{'F': frequency, 'W': wavelength, 'V': betaSpeed, 'A': wavelength}[a.algorithm[0]]
	inAir := a.algorithm[0] == 'A'
	x := func(s float64) float64 { // the uniform variable for a value of the axis
		w := wavelengthOf(a.unit.quantity, s, a.rest)
		if a.code == "AWAV" && !inAir {
			w = standardAirToVacuum(w)
		} else if a.code != "AWAV" && inAir {
			w = standardVacuumToAir(w)
		}
		return valueOf(q, w, a.rest)
	}
	s0, step := a.value*a.unit.factor, a.step*a.unit.factor
	x0, slope := x(s0), derivative(x, s0, a.unit.quantity)
	for i := range v {
		w := wavelengthOf(q, x0+slope*step*(float64(i+1)-a.pixel), a.rest)
		if inAir && a.code != "AWAV" {
			w = standardAirToVacuum(w)
		}
		v[i] = w
	}
	return v, true
}

// derivative of f at x0 by Richardson's extrapolation of central differences.
// Velocities may be near zero: their steps have the scale of c.
func derivative(f func(float64) float64, x0 float64, q quantity) float64 {
	h := 1e-3 * math.Abs(x0)
	switch q {
	case opticalSpeed, radioSpeed, apparentSpeed:
		h = 1e-3 * lightSpeed
	case redshiftAxis, betaSpeed:
		h = 1e-3
	}
	d := func(h float64) float64 { return (f(x0+h) - f(x0-h)) / (2 * h) }
	d1, d2, d4 := d(h), d(h/2), d(h/4)
	r1, r2 := (4*d2-d1)/3, (4*d4-d2)/3
	return (16*r2 - r1) / 15
}

// standardAirToVacuum converts wavelengths in m as axis definitions mean it:
// Edlen 1953 (J. Opt. Soc. Am. 43, 339) at the wavenumber in air, the form that
// FITS libraries use for AWAV. Spectra whose axis is air are converted by package
// spectrum instead.
func standardAirToVacuum(air float64) float64 {
	s2 := 1e-12 / (air * air) // wavenumber squared, micron^-2
	return air * (1 + 1e-8*(6432.8+2949810/(146-s2)+25540/(41-s2)))
}

func standardVacuumToAir(w float64) float64 {
	air := w
	for range 6 {
		air *= w / standardAirToVacuum(air)
	}
	return air
}
