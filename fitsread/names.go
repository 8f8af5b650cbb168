package fitsread

import (
	"strings"

	"duskline/spectrum"
)

// role is what a column, an image line or an image HDU holds.
type role int

const (
	roleNone role = iota
	roleWave
	roleFlux
	roleSigma
	roleVariance
	roleIvar
	roleWeight // a weight whose kind the name leaves open
	roleMask
	roleQuality // non-zero is bad by definition (IVOA Quality)
	roleGood    // non-zero is good
	roleErrLow  // error towards lower flux
	roleErrHigh // error towards higher flux
	rolePower   // resolving power, or the FWHM where unit or numbers tell
	roleFWHM    // width of the resolution element, Angstrom
	roleDisp    // its sigma in pixels
	roleKernel  // line spread functions, a plane an object
	roleStep    // scalar: step beside a starting value
	rolePoints  // scalar: number of pixels in use
	roleOrder   // scalar: echelle order
)

// vocabulary lists the names by which a role goes, best first. Names are
// compared in lower case with everything but letters and digits left out.
var vocabulary = []struct {
	role  role
	words string
}{
	{roleWave, "wave wavelength lambda loglam loglambda lnlam lnlambda logwave logwavelength lnwave wavelengths lam wavel wavelen " +
		"wl wa wav waveair waveairaa wavevac wavelengthair wavelengthvac lambdaair lambdavac airwave vacwave airwavelength " +
		"vacuumwavelength wavevacuum awav frequency freq nu energy ener wavenumber wavenum wavn wlen restwave waverest " +
		"wavelengthrest restwavelength lambdarest log10lam log10lambda log10wave loglambdaaa"},
	{roleFlux, "flux fluxlambda flam flambda fluxdensity fl fnu fluxnu fluxcal fluxes spec spectrum abnet fluxopt intensity " +
		"signal counts net sci"},
	{roleSigma, "err error sigma fluxerr fluxerror errflux errorflux staterror staterr statisticalerror sig uncertainty unc eflux " +
		"fluxsigma sigmaflux fluxunc noise std stddev stdev rms errors errs dflux fluxstd efluxlambda fluxerrors sigflux errlambda"},
	{roleErrLow, "errlo errlow errlower errminus fluxerrlo fluxerrlow staterrlow"},
	{roleErrHigh, "errhi errhigh errupper errplus fluxerrhi fluxerrhigh staterrhigh"},
	{roleIvar, "ivar invvar invvariance inversevariance fluxivar ivarflux iv inverse"},
	{roleVariance, "variance var fluxvar fluxvariance varflux"},
	{roleWeight, "weight weights wgt wt stat"},
	{roleQuality, "quality qual dq dataqual dataquality flag flags badpix badpixel bad bpm qualityflag"},
	{roleGood, "good goodpix goodpixel goodpixels valid use usable ok"},
	{roleMask, "mask andmask ormask bitmask pixmask maskbits crmask"},
	{rolePower, "resolution resolvingpower respower r specres waveres"},
	{roleFWHM, "fwhm wresl resfwhm lsffwhm"},
	{roleDisp, "wdisp disp dispersion lsfsigma"},
	{roleStep, "deltaw deltawave deltalambda dw dwave dlambda wstep wavestep delta step cdelt cdelt1 coeff1 dloglam loglamstep"},
	{rolePoints, "npts nelem npix npoints nwave npixels"},
	{roleOrder, "order sporder echelleorder ordernumber ordernum relorder spectralorder ord"},
}

type wordRole struct {
	role role
	rank int // smaller is better
}

var roleOfWord = func() map[string]wordRole {
	m := map[string]wordRole{}
	for _, v := range vocabulary {
		for i, w := range strings.Fields(v.words) {
			m[w] = wordRole{v.role, i}
		}
	}
	return m
}()

// bare reduces a name to lower-case letters and digits.
func bare(s string) string {
	clean := true
	for i := 0; i < len(s) && clean; i++ {
		clean = s[i] >= 'a' && s[i] <= 'z' || s[i] >= '0' && s[i] <= '9'
	}
	if clean {
		return s
	}
	return strings.Map(func(r rune) rune {
		switch {
		case r >= 'A' && r <= 'Z':
			return r + 'a' - 'A'
		case r >= 'a' && r <= 'z', r >= '0' && r <= '9':
			return r
		}
		return -1
	}, s)
}

// roleOfName tells what a column or an image of that name holds. A unit may be
// hung on the name ("wave_aa", "lambda_nm").
func roleOfName(name string) wordRole {
	b := bare(name)
	if wr, ok := roleOfWord[b]; ok {
		return wr
	}
	for _, unit := range []string{"angstroms", "angstrom", "aa", "nm", "um", "micron", "hz", "ev"} {
		if rest, ok := strings.CutSuffix(b, unit); ok {
			if wr, ok := roleOfWord[rest]; ok && wr.role == roleWave {
				return wr
			}
		}
	}
	return wordRole{}
}

// unitInName reads a unit that is hung on a column's name.
func unitInName(name string) (spectralUnit, bool) {
	i := strings.LastIndexAny(name, "_([ ")
	if i < 0 {
		return spectralUnit{}, false
	}
	return parseUnit(strings.Trim(name[i:], "_()[] "))
}

// mediumInWords reads air or vacuum out of a column's name, UCD or comment.
func mediumInWords(name, ucd, comment string) (spectrum.Medium, bool) {
	if ucd = strings.TrimPrefix(ucd, "ivoa:"); strings.HasPrefix(ucd, "em.wl") {
		if strings.Contains(ucd, "obs.atmos") {
			return spectrum.Air, true
		}
		return spectrum.Vacuum, true // Spectrum data model 1.2: air is em.wl;obs.atmos
	}
	b := bare(name)
	text := " " + strings.ToLower(comment) + " "
	switch {
	case strings.Contains(b, "air") || hasWord(text, "air"):
		return spectrum.Air, true
	case strings.Contains(b, "vac") || hasWord(text, "vacuum") || hasWord(text, "vac"):
		return spectrum.Vacuum, true
	}
	return spectrum.Vacuum, false
}

// hasWord finds a whole word in lower-case text.
func hasWord(text, word string) bool {
	for i := 0; ; {
		k := strings.Index(text[i:], word)
		if k < 0 {
			return false
		}
		k += i
		end := k + len(word)
		if (k == 0 || !isLetter(text[k-1])) && (end == len(text) || !isLetter(text[end])) {
			return true
		}
		i = end
	}
}

func isLetter(c byte) bool { return c >= 'a' && c <= 'z' }

// scaleInName reads a logarithm out of a column's name.
func scaleInName(name string) scale {
	b := bare(name)
	switch {
	case strings.HasPrefix(b, "log"):
		return log10
	case strings.HasPrefix(b, "ln"):
		return ln
	}
	return linear
}

// quantityInName reads frequency, energy or wavenumber out of a column's name.
func quantityInName(name, ucd string) quantity {
	b := bare(name)
	switch {
	case strings.HasPrefix(ucd, "em.freq") || strings.HasPrefix(b, "freq") || b == "nu":
		return frequency
	case strings.HasPrefix(ucd, "em.energy") || strings.HasPrefix(b, "ener"):
		return energy
	case strings.HasPrefix(ucd, "em.wavenumber") || strings.HasPrefix(b, "wavenum") || b == "wavn":
		return wavenumber
	}
	return wavelength
}

// restInName reports a wavelength column that says it is in the rest frame.
func restInName(name string) bool { return strings.Contains(bare(name), "rest") }
