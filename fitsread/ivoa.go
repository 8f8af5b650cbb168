package fitsread

import (
	"fmt"
	"strings"
)

// What the card VOCLASS of the IVOA Spectrum data model says of a table, 1.0 to 1.2:
// the class of data and its version, "SPECTRUM 1.00", "Spectrum-1.0".
const (
	classUnstated = iota
	classSpectrum
	classOther
)

// dataClass reads VOCLASS of the HDU, or of the primary header. Of a set of
// segments, class SED, VOSEGT says what this one is. word is as written, "" where
// nothing is.
func (f *File) dataClass(h *hdu) (class int, word string) {
	word = h.header.text("VOCLASS")
	if word == "" {
		word = f.hdus[0].header.text("VOCLASS")
	}
	stem := classWord(word)
	if stem == "sed" {
		if word = h.header.text("VOSEGT"); word == "" {
			return classUnstated, ""
		}
		stem = classWord(word)
	}
	switch {
	case stem == "":
		return classUnstated, ""
	case stem == "spectrum":
		return classSpectrum, word
	}
	return classOther, word
}

// classWord returns the letters before a version.
func classWord(s string) string {
	s = strings.ToLower(strings.TrimSpace(s))
	if i := strings.LastIndexByte(s, ':'); i >= 0 {
		s = s[i+1:]
	}
	for i := range len(s) {
		if s[i] < 'a' || s[i] > 'z' {
			return s[:i]
		}
	}
	return s
}

// unclassed says why tables of other classes are not read as spectra; spectra
// only is set where some table is called a spectrum and the others are not.
func (f *File) unclassed(spectraOnly bool) (skipped []string) {
	for _, h := range f.hdus {
		if h.kind != kindTable && h.kind != kindASCII {
			continue
		}
		switch class, word := f.dataClass(h); {
		case class == classOther:
			skipped = append(skipped, fmt.Sprintf("HDU %d (%s): VOCLASS says %s, not a spectrum", h.index, h.name, word))
		case class == classUnstated && spectraOnly && h.broken == nil:
			if c, err := f.tableCandidate(h, byNames); err == nil && c != nil {
				skipped = append(skipped, fmt.Sprintf("HDU %d (%s): VOCLASS calls another table the spectrum", h.index, h.name))
			}
		}
	}
	return skipped
}

// otherClass is the error for a file all of whose tables are of classes that hold
// no spectrum; nil where there is none.
func (f *File) otherClass() *ReadError {
	for _, h := range f.hdus {
		if h.kind != kindTable && h.kind != kindASCII {
			continue
		}
		if class, word := f.dataClass(h); class == classOther {
			return fault(ErrNoSpectrum, h.index, "give spectra, or a layout if it is one nevertheless",
				"the table %q is data of the class %s, not a spectrum: its card VOCLASS or VOSEGT says so", h.name, word)
		}
	}
	return nil
}

// modelPath reduces a utype to its path below the spectrum: without name space
// ("spec:", "sdm:", "ssa:"), and without the words before it that versions of the
// model put there ("Spectrum.", "SED.Segment."). Drafts before 1.0 said Points for
// Data (from memory).
func modelPath(utype string) string {
	if utype == "" {
		return ""
	}
	if i := strings.LastIndexByte(utype, ':'); i >= 0 {
		utype = utype[i+1:]
	}
	for _, word := range []string{"sed.", "segment.", "spectrum.", "dataset."} {
		utype = strings.TrimPrefix(utype, word)
	}
	if rest, ok := strings.CutPrefix(utype, "points."); ok {
		utype = "data." + rest
	}
	return draftPaths.Replace(utype)
}

var (
	draftPaths = strings.NewReplacer("data.spectralcoord.", "data.spectralaxis.", "data.flux.", "data.fluxaxis.")
	// UCD1+ had phot.fluDens before phot.flux.density (from memory); UCDs may have a
	// name space.
	oldWords = strings.NewReplacer("ivoa:", "", "phot.fludens", "phot.flux.density")
)

// roleOfUCD tells the role from an IVOA utype (Spectrum data model 1.0 to 1.2) or
// from a UCD. certain is true for utypes, which name exactly one role.
func roleOfUCD(utype, ucd string) (r role, certain bool) {
	switch modelPath(utype) {
	case "data.spectralaxis.value":
		return roleWave, true
	case "data.fluxaxis.value":
		return roleFlux, true
	case "data.fluxaxis.accuracy.staterror":
		return roleSigma, true
	case "data.fluxaxis.accuracy.staterrlow":
		return roleErrLow, true
	case "data.fluxaxis.accuracy.staterrhigh":
		return roleErrHigh, true
	case "data.fluxaxis.quality", "data.fluxaxis.accuracy.quality", "data.fluxaxis.accuracy.qualitystatus":
		return roleQuality, true
	case "data.spectralaxis.resolution", "data.spectralaxis.respower":
		return rolePower, true
	case "data.spectralaxis.order", "data.spectralaxis.relorder":
		return roleOrder, true
	}
	if ucd == "" {
		return roleNone, false
	}
	first, rest, _ := strings.Cut(oldWords.Replace(ucd), ";")
	switch first {
	case "em.wl", "em.freq", "em.energy", "em.wavenumber":
		return roleWave, false
	case "phot.flux.density", "phot.flux", "phot.count", "phot.fluence":
		return roleFlux, false
	case "stat.error":
		switch {
		case !strings.HasPrefix(rest, "phot."):
		case strings.Contains(rest, "stat.min"):
			return roleErrLow, false
		case strings.Contains(rest, "stat.max"):
			return roleErrHigh, false
		default:
			return roleSigma, false
		}
	case "stat.variance":
		if strings.HasPrefix(rest, "phot.") {
			return roleVariance, false
		}
	case "meta.code.qual":
		return roleQuality, false
	case "spect.resolution":
		return rolePower, false
	case "instr.order":
		return roleOrder, false
	}
	return roleNone, false
}
