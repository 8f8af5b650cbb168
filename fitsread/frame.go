package fitsread

import (
	"fmt"
	"math"
	"strings"

	"duskline/spectrum"
)

// observation is what the headers say about all spectra of a group.
type observation struct {
	frame       spectrum.Frame
	frameWhy    string
	frameDoubt  spectrum.Code // "" when the frame is stated without doubt
	velocity    float64       // of a correction that is stated but not applied, km/s; NaN
	standard    string        // SPECSYS of a standard of rest beyond the solar system
	observer    observerVelocity
	jd          float64 // mid-exposure, UTC; NaN
	site        spectrum.Site
	siteKnown   bool
	onGround    bool
	medium      spectrum.Medium
	mediumKnown bool
	mediumWhy   string
	power       float64 // resolving power, 0 when not stated
}

// observe reads the headers, most specific first, for the wavelengths of w.
func observe(hs []*hdu, w *wavePlan) observation {
	o := observation{velocity: math.NaN(), jd: math.NaN()}
	o.readMedium(hs)
	o.site, o.siteKnown = readSite(hs)
	o.jd = midExposure(hs)
	if v, _, ok := findNumber(hs, "AIRMASS"); ok && v >= 1 {
		o.onGround = true
	}
	o.onGround = o.onGround || o.siteKnown
	o.readFrame(hs, w)
	o.observer = readVelosys(hs)
	for _, key := range []string{"SPEC_RP", "RESPOWER", "SPEC_RES", "SPECRES"} {
		// In SPEC_RES the Spectrum data model has an FWHM, others have the power.
		v, c, ok := findNumber(hs, key)
		if ok && v > 10 && v < 1e7 && (v >= 100 || key == "SPEC_RP" || key == "RESPOWER" || strings.Contains(strings.ToLower(c.comment()), "power")) {
			o.power = v
			break
		}
	}
	return o
}

func findCard(hs []*hdu, key string) (card, bool) {
	for _, h := range hs {
		if c, ok := h.header.find(key); ok {
			return c, true
		}
	}
	return card{}, false
}

func findNumber(hs []*hdu, key string) (float64, card, bool) {
	c, ok := findCard(hs, key)
	if !ok {
		return 0, c, false
	}
	v, ok := parseNumber(c.value())
	return v, c, ok
}

// remarks calls f with every line of COMMENT and HISTORY in lower case.
func remarks(hs []*hdu, f func(string)) {
	for _, h := range hs {
		for _, c := range h.header {
			if c.key == "COMMENT" || c.key == "HISTORY" {
				f(strings.ToLower(c.rest))
			}
		}
	}
}

// readMedium looks for a statement on air or vacuum: first cards made for it,
// then remarks about wavelengths. Remarks that contradict each other state nothing.
func (o *observation) readMedium(hs []*hdu) {
	state := func(m spectrum.Medium, why string) { o.medium, o.mediumKnown, o.mediumWhy = m, true, why }
	for _, h := range hs {
		if v, ok := h.header.logical("VACUUM"); ok {
			if v {
				state(spectrum.Vacuum, "card VACUUM")
			} else {
				state(spectrum.Air, "card VACUUM")
			}
			return
		}
	}
	for _, key := range []string{"AIRORVAC", "AIR_VAC", "AIRVAC", "VACAIR", "WAVEMED", "WAVE_MED", "MEDIUM", "LAMMED", "WAVETYPE", "WAVE_REF"} {
		c, ok := findCard(hs, key)
		if !ok {
			continue
		}
		v := strings.ToLower(c.value())
		switch {
		case strings.HasPrefix(v, "vac"):
			state(spectrum.Vacuum, "card "+key)
			return
		case strings.HasPrefix(v, "air"):
			state(spectrum.Air, "card "+key)
			return
		}
	}
	air, vacuum := false, false
	remarks(hs, func(s string) {
		if !hasAny(s, "wave", "lambda") || strings.Contains(s, "not ") {
			return
		}
		vacuum = vacuum || hasWord(s, "vacuum")
		air = air || hasWord(s, "in air") || hasWord(s, "air wavelengths") || hasWord(s, "air wavelength")
	})
	if air != vacuum {
		m := spectrum.Vacuum
		if air {
			m = spectrum.Air
		}
		state(m, "a remark in the header")
	}
}

// assumeMedium decides where nothing is stated: vacuum if any wavelength lies
// below 2000 Angstrom, where nobody uses air wavelengths; air for spectra from
// the ground (AIRMASS or a site in the header) that are not on a logarithmic grid,
// since arc lamps are listed in air; vacuum otherwise, as modern surveys have it.
// Common practice, no source; the warning MediumAssumed travels along.
func (o *observation) assumeMedium(shortest float64, logGrid bool) spectrum.Medium {
	if shortest >= 2000 && o.onGround && !logGrid {
		return spectrum.Air
	}
	return spectrum.Vacuum
}

// correctionCards are the keywords under which programs keep a velocity
// correction of the wavelengths or whether it was made.
var correctionCards = []struct {
	keys  string
	frame spectrum.Frame
}{
	{"HELIO_RV HELIO HELCORR HELIOCOR HELIOVEL V_HELIO VHELIO HELVEL HELIO_V HELICORR HELICOR", spectrum.Heliocentric},
	{"BARYCORR BARYCOR BARYVEL V_BARY VBARY BARY_RV BARY_V BERV BARYCENT", spectrum.Barycentric},
}

// systemKeys returns the cards that state the frame, best first: SPECSYS of the
// description of the axis in use, and its form for the cells of a table column,
// SPECn (FITS standard 4.0, table 22).
func (w *wavePlan) systemKeys() []string {
	keys := []string{"SPECSYS"}
	if w.axis != nil && w.axis.alt != "" {
		keys = []string{"SPECSYS" + w.axis.alt, "SPECSYS"}
	}
	for _, c := range []*column{w.values.col, w.cells} {
		if c != nil {
			keys = append([]string{fmt.Sprintf("SPEC%d", c.number)}, keys...)
		}
	}
	return keys
}

// readFrame finds the velocity frame: SPECSYS; a redshift that was taken out; cards
// about a heliocentric or barycentric correction; remarks. Otherwise single
// exposures from the ground, whose header has time and place, count as topocentric
// and all others as barycentric, both with FrameAssumed; in tables of the IVOA
// Spectrum data model those with a time do, whose default that is.
func (o *observation) readFrame(hs []*hdu, w *wavePlan) {
	for _, key := range w.systemKeys() {
		if c, ok := findCard(hs, key); ok && o.systemStated(c) {
			return
		}
	}
	// CoordSys.SpectralFrame.Redshift of the data model.
	if v, _, ok := findNumber(hs, "REST_Z"); ok && v != 0 {
		o.frame, o.frameDoubt, o.frameWhy = spectrum.RestFrame, spectrum.RestFrameStated, "card REST_Z says that a redshift was taken out"
		return
	}
	if o.fromCorrections(hs) || o.fromRemarks(hs) {
		return
	}
	o.frameDoubt = spectrum.FrameAssumed
	class, _ := findCard(hs, "VOCLASS")
	switch {
	case math.IsNaN(o.jd):
	case classWord(class.value()) == "spectrum":
		o.frame, o.frameWhy = spectrum.Topocentric, "velocity frame not stated; topocentric by the default of the Spectrum data model"
		return
	case o.onGround:
		o.frame, o.frameWhy = spectrum.Topocentric, "velocity frame not stated; a single exposure from the ground, taken as topocentric"
		return
	}
	o.frame, o.frameWhy = spectrum.Barycentric, "velocity frame not stated; barycentric assumed"
}

// systemStated takes the frame from a SPECSYS card.
func (o *observation) systemStated(c card) bool {
	fr, standard, ok := frameNamed(c.value())
	if !ok {
		return false
	}
	o.frame, o.frameWhy, o.frameDoubt, o.standard = fr, c.key, "", standard
	if fr == spectrum.RestFrame {
		o.frameDoubt = spectrum.RestFrameStated
		o.frameWhy = c.key + " says that the wavelengths are at rest with the source; the redshift is what is left"
	}
	return true
}

// frameNamed reads a SPECSYS value; its first letters tell, also of the data
// model's TOPOCENTER and the like. standard is the name of a standard of rest
// beyond the solar system as FITS has it.
func frameNamed(s string) (frame spectrum.Frame, standard string, ok bool) {
	s = strings.ToUpper(strings.TrimSpace(s))
	for _, f := range []struct {
		prefix   string
		frame    spectrum.Frame
		standard string
	}{{"BARY", spectrum.Barycentric, ""}, {"HELIO", spectrum.Heliocentric, ""}, {"TOPO", spectrum.Topocentric, ""},
		{"GEOC", spectrum.Geocentric, ""}, {"SOURCE", spectrum.RestFrame, ""}, {"REST", spectrum.RestFrame, ""},
		{"LSRK", spectrum.OtherFrame, "LSRK"}, {"LSRD", spectrum.OtherFrame, "LSRD"}, {"LSR", spectrum.OtherFrame, "LSR"},
		{"GALACT", spectrum.OtherFrame, "GALACTOC"}, {"LOCALG", spectrum.OtherFrame, "LOCALGRP"}, {"CMB", spectrum.OtherFrame, "CMBDIPOL"}} {
		if strings.HasPrefix(s, f.prefix) {
			return f.frame, f.standard, true
		}
	}
	return 0, "", false
}

// fromCorrections weighs the cards about corrections: a clear "made" beats a
// clear "not made" beats a bare number, which most programs leave behind after
// making the correction.
func (o *observation) fromCorrections(hs []*hdu) bool {
	type finding struct {
		found bool
		frame spectrum.Frame
		key   string
		value float64
	}
	var made, unmade, bare finding
	for _, cc := range correctionCards {
		for _, key := range strings.Fields(cc.keys) {
			c, ok := findCard(hs, key)
			if !ok {
				continue
			}
			is := finding{true, cc.frame, key, math.NaN()}
			text := strings.ToUpper(c.value())
			note := strings.ToLower(c.comment())
			v, isNumber := parseNumber(text)
			switch {
			case isNumber && hasAny(note, "not applied", "to be applied", "to apply", "not corrected", "to add", "to be added"):
				is.value = v
				unmade = pickFirst(unmade, is, unmade.found)
			case isNumber && hasAny(note, "added", "applied", "corrected", "subtracted", "removed"):
				made = pickFirst(made, is, made.found)
			case isNumber && v != 0:
				bare = pickFirst(bare, is, bare.found)
			case text == "T" || hasAny(text, "COMPLETE", "DONE", "APPLIED", "YES", "TRUE"):
				made = pickFirst(made, is, made.found)
			case text == "F" || hasAny(text, "OMIT", "PERFORM", "SKIP", "FALSE"):
				unmade = pickFirst(unmade, is, unmade.found)
			}
		}
	}
	switch {
	case made.found:
		o.frame, o.frameWhy = made.frame, "card "+made.key
	case unmade.found:
		o.frame, o.frameWhy, o.velocity = spectrum.Topocentric, "card "+unmade.key+" says the correction was not made", unmade.value
	case bare.found:
		o.frame, o.frameDoubt = bare.frame, spectrum.FrameUncertain
		o.frameWhy = fmt.Sprintf("card %s gives a correction without saying whether it was made; taken as made", bare.key)
	default:
		return false
	}
	return true
}

func pickFirst[T any](have, next T, found bool) T {
	if found {
		return have
	}
	return next
}

// fromRemarks reads COMMENT and HISTORY for words on the frame, and the cards of
// programs that shift spectra.
func (o *observation) fromRemarks(hs []*hdu) bool {
	rest, helio, bary := false, false, false
	remarks(hs, func(s string) {
		if hasAny(s, "rest frame", "rest-frame", "restframe", "adjusted for radial vel", "redshift removed", "deredshifted", "de-redshifted") {
			rest = true
		}
		if hasAny(s, "correct", "convert", "shifted", "applied", "frame", "velocity") && !hasAny(s, "not ", "omit") {
			helio = helio || strings.Contains(s, "heliocentric")
			bary = bary || strings.Contains(s, "barycentric")
		}
	})
	switch {
	case rest:
		o.frame, o.frameDoubt = spectrum.RestFrame, spectrum.RestFrameStated
		o.frameWhy = "a remark says that the object's velocity was taken out"
	case bary:
		o.frame, o.frameDoubt, o.frameWhy = spectrum.Barycentric, spectrum.FrameUncertain, "only a remark speaks of a barycentric correction"
	case helio:
		o.frame, o.frameDoubt, o.frameWhy = spectrum.Heliocentric, spectrum.FrameUncertain, "only a remark speaks of a heliocentric correction"
	default:
		return false
	}
	return true
}
