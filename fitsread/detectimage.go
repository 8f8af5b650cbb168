package fitsread

import (
	"fmt"
	"slices"
	"strings"
)

// imageSet is the images that share a name but for the word of their role.
type imageSet struct {
	prefix string
	byRole map[role]*hdu
	word   map[role]string // the word that told the role
}

// weightRoles are in the order in which they are preferred.
var weightRoles = []role{roleIvar, roleSigma, roleVariance, roleWeight}

// imageRole takes the role's word off an image's EXTNAME: "B_IVAR" is inverse
// variance with prefix "B".
func imageRole(name string) (prefix, word string, r role) {
	if wr := roleOfName(name); wr.role != roleNone && len(bare(name)) > 1 {
		return "", name, wr.role
	}
	tokens := strings.FieldsFunc(name, func(r rune) bool { return strings.ContainsRune("-_. :", r) })
	for _, i := range []int{len(tokens) - 1, 0} {
		if len(tokens) < 2 || len(tokens[i]) < 2 {
			continue
		}
		if wr := roleOfName(tokens[i]); wr.role != roleNone && wr.role < roleStep {
			rest := append(append([]string{}, tokens[:i]...), tokens[i+1:]...)
			return strings.Join(rest, "_"), tokens[i], wr.role
		}
	}
	return "", "", roleNone
}

// imageSets sorts the images by prefix, in file order. A primary image without a
// name next to named ones is the flux.
func (f *File) imageSets() []*imageSet {
	var sets []*imageSet
	set := func(prefix string) *imageSet {
		for _, s := range sets {
			if s.prefix == prefix {
				return s
			}
		}
		s := &imageSet{prefix: prefix, byRole: map[role]*hdu{}, word: map[role]string{}}
		sets = append(sets, s)
		return s
	}
	for _, h := range f.hdus {
		isImage := h.kind == kindImage && h.pixels() > 1 && h.lines() > 0
		if !isImage && h.kind != kindCompressed {
			continue
		}
		prefix, word, r := imageRole(h.name)
		if r == roleNone && f.isPrimary(h) {
			prefix, word, r = "", "", roleFlux
		}
		s := set(prefix)
		if r != roleNone && s.byRole[r] == nil {
			s.byRole[r], s.word[r] = h, word
		}
	}
	return sets
}

// isPrimary reports the image that a file is about: that of the primary HDU, also
// where compressing it moved it into the first extension.
func (f *File) isPrimary(h *hdu) bool {
	if h.index == 0 {
		return h.name == "" || strings.EqualFold(h.name, "primary")
	}
	return h.index == 1 && h.tiles != nil && len(f.hdus[0].axes) == 0 && (h.name == "" || strings.EqualFold(h.name, "compressed_image"))
}

// findImages reads images that are told by their EXTNAME: FLUX, WAVELENGTH and
// IVAR, one set or several arms with a common prefix each, an object a line.
func (f *File) findImages() (*plan, error) {
	sets := f.imageSets()
	var shared *imageSet // wavelengths for all sets
	for _, s := range sets {
		if s.byRole[roleWave] != nil && (s.prefix == "" || shared == nil && s.byRole[roleFlux] == nil) {
			shared = s
		}
	}
	var cands []candidate
	for _, s := range sets {
		flux := s.byRole[roleFlux]
		if flux == nil {
			continue
		}
		wave, word := s.byRole[roleWave], s.word[roleWave]
		if wave == nil && shared != nil {
			wave, word = shared.byRole[roleWave], shared.word[roleWave]
		}
		if wave == nil {
			continue // left to its spectral axis
		}
		for _, h := range []*hdu{flux, wave} {
			if h.kind == kindCompressed {
				return nil, compressedFault(h)
			}
		}
		if wave.pixels() != flux.pixels() || wave.lines() != 1 && wave.lines() != flux.lines() {
			continue
		}
		var a arm
		a.wave = wavePlan{values: place{hdu: wave, line: eachLine}}
		a.wave.describe(word, wave.header.text("BUNIT"), "", "")
		if err := f.companions(&a, s, flux); err != nil {
			return nil, err
		}
		base, armName := splitArm(s.prefix)
		if armName == "" {
			base, armName = "", s.prefix // a common scheme of names: sets of one file are arms
		}
		a.name = armName
		cands = append(cands, candidate{name: s.prefix, base: base, shape: "images", arm: a, rows: flux.lines()})
	}
	if len(cands) == 0 {
		return nil, nil
	}
	p := &plan{why: "images are named as wavelength and flux"}
	p.groups, p.skipped = arrange(cands)
	return p, nil
}

// companions adds weight, mask and resolution images of the same shape as the
// flux. An image of another shape is not one; a compressed mask is not needed
// where there is an inverse variance, a compressed weight is.
func (f *File) companions(a *arm, s *imageSet, flux *hdu) error {
	a.flux, a.fluxUnit = place{hdu: flux, line: eachLine}, flux.header.text("BUNIT")
	for _, h := range s.byRole {
		if h.kind == kindImage && slices.Equal(h.axes, flux.axes) {
			h.turned = flux.turned
		}
	}
	for _, r := range weightRoles {
		h := s.byRole[r]
		if h == nil {
			continue
		}
		if h.kind == kindCompressed {
			return compressedFault(h)
		}
		if h.pixels() == flux.pixels() && h.lines() == flux.lines() {
			a.weight, a.weightRole = place{hdu: h, line: eachLine}, r
			break
		}
	}
	for _, r := range []role{roleQuality, roleGood, roleMask} {
		h := s.byRole[r]
		if h == nil || a.weightRole == roleIvar && (r == roleMask || h.kind == kindCompressed) {
			continue
		}
		if h.kind == kindCompressed {
			return compressedFault(h)
		}
		if h.pixels() == flux.pixels() && h.lines() == flux.lines() {
			a.masks = append(a.masks, f.maskFor(place{hdu: h, line: eachLine}, r))
		}
	}
	for _, r := range []role{rolePower, roleFWHM, roleDisp} {
		h := s.byRole[r]
		if h != nil && h.kind == kindImage && h.pixels() == flux.pixels() && (h.lines() == flux.lines() || h.lines() == 1) {
			a.resolution, a.resRole = place{hdu: h, line: eachLine}, r
			break
		}
		if h != nil && h.kind == kindImage && len(h.axes) == 3 && h.axes[0] == flux.pixels() && h.axes[1] > 1 &&
			h.axes[1] < 100 && h.axes[2] == flux.lines() {
			a.kernel, a.resRole = place{hdu: h, line: eachLine}, roleDisp
			break
		}
	}
	return nil
}

// findAxis reads the first image whose header describes a spectral axis along
// its lines, or along its columns.
func (f *File) findAxis() (*plan, error) {
	var firstErr error
	note := func(err error) {
		if firstErr == nil {
			firstErr = err
		}
	}
	for _, h := range f.hdus {
		if h.kind != kindImage || h.pixels() < 2 || h.lines() == 0 {
			continue
		}
		if strings.HasPrefix(strings.ToUpper(h.header.text("CTYPE1")), "MULTISPE") {
			note(fault(ErrNoSpectrum, h.index, "write the orders out with one wavelength array each",
				"wavelengths given by functions in WAT cards are not supported"))
			continue
		}
		ax, ok, err := f.imageAxis(h)
		if err == nil && ok && ax.algorithm == "TAB" {
			var w wavePlan
			if w, err = f.tableAxis(h, ax); err == nil {
				return f.linePlan(h, w, fmt.Sprintf("CTYPE%d%s names a table of wavelengths", ax.number, ax.alt), "")
			}
			err = fmt.Errorf("the table that CTYPE%d%s names cannot be used: %w", ax.number, ax.alt, err)
		}
		if err != nil {
			note(fault(ErrBadHeader, h.index, "write a layout that says where the wavelengths are", "%v", err))
			continue
		}
		if ok {
			return f.linePlan(h, axisWave(&ax, h), "the header describes a spectral axis", ax.guessed)
		}
		if n := cubeAxis(h); n > 0 {
			note(fault(ErrNoSpectrum, h.index, "extract the spectra of the objects first", "axis %d of the image is a spectral one: this is a cube", n))
		}
	}
	return nil, firstErr
}

// imageAxis reads the spectral axis of an image's lines. An image of two axes
// whose second one is spectral is turned. Extensions inherit what the primary
// header says where that has no data.
func (f *File) imageAxis(h *hdu) (axis, bool, error) {
	headers := []header{h.header}
	if h.index > 0 && len(f.hdus[0].axes) == 0 {
		headers = append(headers, f.hdus[0].header)
	}
	var firstErr error
	for _, hd := range headers {
		ax, ok, err := readAxis(hd, h.first)
		if ok && err == nil && ax.code != "" {
			return ax, true, nil
		}
		if len(h.axes) > 1 && h.axes[1] > 1 && h.lines() == h.axes[1] {
			if second, ok2, err := readAxis(hd, h.first+1); ok2 && err == nil && second.code != "" {
				h.turned = true
				return second, true, nil
			}
		}
		if ok && err == nil {
			return ax, true, nil
		}
		if firstErr == nil {
			firstErr = err
		}
	}
	return axis{}, false, firstErr
}

// cubeAxis returns the number of a spectral axis beyond the second, 0 for none.
func cubeAxis(h *hdu) int {
	for n := h.first + 2; n < h.first+len(h.axes); n++ {
		if ax, ok, _ := readAxis(h.header, n); ok && ax.code != "" && h.axes[n-h.first] > 1 {
			return n
		}
	}
	return 0
}

// linePlan reads the lines of an image with known wavelengths: one line, or
// lines whose meaning the header gives, or an object a line. In a cube with
// several lines a plane, an object has a line in every plane, and the planes'
// meaning is what the header gives; without that the first is the flux.
func (f *File) linePlan(h *hdu, w wavePlan, why, guess string) (*plan, error) {
	p := &plan{why: why}
	if guess != "" {
		p.guesses = append(p.guesses, guess)
	}
	a := arm{wave: w, flux: place{hdu: h, line: eachLine}, fluxUnit: h.header.text("BUNIT")}
	lines, rows := h.lines(), int64(1)
	kinds := lines // lines of different meaning
	if len(h.axes) > 2 && h.axes[1] > 1 {
		rows, kinds = h.axes[1], lines/h.axes[1]
	}
	roles := lineRoles(h, int(kinds))
	switch {
	case roles != nil || lines == 1:
	case rows > 1 && kinds > 1:
		roles = make([]role, kinds)
		roles[0] = roleFlux
		p.guesses = append(p.guesses, fmt.Sprintf("only the first of %d planes of the image in HDU %d was read", kinds, h.index))
	case rows == 1 && lines <= maxGuessLines:
		var err error
		if roles, err = f.guessLines(h); err != nil {
			return nil, err
		}
		if roles != nil {
			p.guesses = append(p.guesses, fmt.Sprintf("the %d lines of the image in HDU %d were told apart by their numbers", lines, h.index))
		}
	}
	if roles == nil {
		if lines > 1 {
			p.guesses = append(p.guesses, fmt.Sprintf("each of the %d lines of the image in HDU %d taken for one spectrum", lines, h.index))
		}
		for _, s := range f.imageSets() {
			if s.byRole[roleFlux] == h {
				if err := f.companions(&a, s, h); err != nil {
					return nil, err
				}
			}
		}
		p.groups = []group{{name: h.name, arms: []arm{a}, rows: lines}}
		return p, nil
	}
	haveFlux := false
	for i, r := range roles {
		at := place{hdu: h, line: int64(i)}
		if rows > 1 {
			at.line, at.base, at.lines = eachLine, int64(i)*rows, rows
		}
		switch {
		case r == roleFlux && !haveFlux:
			a.flux, haveFlux = at, true
		case (r == roleIvar || r == roleSigma || r == roleVariance || r == roleWeight) && !a.weight.isSet():
			a.weight, a.weightRole = at, r
		case r == roleMask && len(a.masks) == 0:
			a.masks = append(a.masks, maskPlan{at: at, role: r})
		case r == roleWave:
			a.wave.values, a.wave.axis = at, nil
		}
	}
	p.groups = []group{{name: h.name, arms: []arm{a}, rows: rows}}
	return p, nil
}
