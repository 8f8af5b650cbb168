package fitsread

import (
	"errors"
	"fmt"
	"strings"
)

// Draft is the text of a layout for files like one that was looked at.
type Draft struct {
	Text string
	// Understood is true when the layout reads the file as it was read without.
	// Else it is a first guess, valid as TOML, whose lines to be looked at end in
	// a comment that begins with EDIT.
	Understood bool
}

// DraftLayout writes a layout for files like the one at path. A file that is not
// understood is drafted from what stands in its HDUs; the error is a *ReadError
// when not even its headers can be read, or when it holds no array of numbers.
func DraftLayout(path string, opts Options) (Draft, error) {
	f, err := Open(path, opts)
	if err == nil {
		defer f.Close()
		return f.draft()
	}
	if !errors.Is(err, ErrNoSpectrum) && !errors.Is(err, ErrLayout) && !errors.Is(err, ErrBadHeader) {
		return Draft{}, err
	}
	return draftUnknown(path, opts, err)
}

// writer collects lines of TOML.
type writer struct{ strings.Builder }

func (w *writer) line(format string, args ...any) { fmt.Fprintf(w, format+"\n", args...) }

// quoteTOML writes a string as TOML does.
func quoteTOML(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r < 0x20 || r == 0x7f || r == 0xfffd:
			fmt.Fprintf(&b, `\u%04x`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// reference names an HDU: by its EXTNAME where that is unique, else by number.
func (f *File) reference(h *hdu) string {
	n := 0
	for _, other := range f.hdus {
		if strings.EqualFold(other.name, h.name) {
			n++
		}
	}
	if h.name == "" || n > 1 {
		return fmt.Sprint(h.index)
	}
	return quoteTOML(h.name)
}

// columnName names a column: by its number where the name does not tell it.
func columnName(h *hdu, c *column) string {
	if found := h.column(c.name); c.name == "" || found == nil || found.number != c.number {
		return quoteTOML(fmt.Sprintf("#%d", c.number))
	}
	return quoteTOML(c.name)
}

func (f *File) writePlace(w *writer, p place) {
	w.line("hdu = %s", f.reference(p.hdu))
	switch {
	case p.col != nil:
		w.line("column = %s", columnName(p.hdu, p.col))
	case p.lines > 0:
		w.line("plane = %d", p.base/p.lines+1)
	case p.line != eachLine && p.hdu.lines() > 1:
		w.line("line = %d", p.line+1)
	}
}

// numberName names a place that numberPlace finds.
func numberName(p place) string {
	if p.card != "" {
		return quoteTOML(p.card)
	}
	return columnName(p.hdu, p.col)
}

func key[T any](from map[string]T, is func(T) bool) string {
	for name, v := range from { // one name at most fits
		if is(v) {
			return name
		}
	}
	return ""
}

// draft writes the plan of an open file as a layout.
func (f *File) draft() (Draft, error) {
	s, err := f.Read(0)
	if err != nil {
		return Draft{}, err
	}
	var w writer
	g := &f.plan.groups[0]
	w.line("# How duskline reads %s and files like it.", strings.Map(printable, fileName(f.path)))
	w.line("# hdu is a number from 0 or an EXTNAME. Without [match] the layout is for any file")
	w.line("# that has all it names.")
	if len(f.plan.groups) > 1 {
		w.line("# The file holds %d more groups of spectra that a layout cannot name; they are", len(f.plan.groups)-1)
		w.line("# read by the built-in rules only.")
	}
	w.line("")
	w.line("description = %s", quoteTOML(f.plan.why))
	if g.orders > 0 {
		w.line(`rows = "orders"`)
	}
	prefix := ""
	for i := range g.arms {
		a := &g.arms[i]
		if len(g.arms) > 1 {
			prefix = "arm."
			w.line("")
			w.line("[[arm]]")
			w.line("name = %s", quoteTOML(a.name))
		}
		if err := f.draftArm(&w, prefix, g, a, s.Medium.String()); err != nil {
			return Draft{}, err
		}
	}
	w.line("")
	switch {
	case f.plan.frame != nil || g.obs.frameDoubt == "":
		w.line("# The headers say the velocity frame: %s.", s.Frame)
	default:
		w.line("# %s.", strings.ToUpper(g.obs.frameWhy[:1])+g.obs.frameWhy[1:])
		w.line("# To state it: barycentric, heliocentric, geocentric, topocentric or rest.")
	}
	if f.plan.frame != nil {
		w.line("[frame]")
	} else {
		w.line("# [frame]")
		w.line("# velocity = %s", quoteTOML(s.Frame.String()))
	}
	if f.plan.frame != nil {
		w.line("velocity = %s", quoteTOML(s.Frame.String()))
	}
	f.draftObject(&w)
	return Draft{Text: w.String(), Understood: true}, nil
}

func fileName(path string) string { return path[strings.LastIndexByte(path, '/')+1:] }

func printable(r rune) rune {
	if r < 0x20 || r == 0x7f || r == 0xfffd {
		return '?'
	}
	return r
}

func (f *File) draftArm(w *writer, prefix string, g *group, a *arm, medium string) error {
	arr, err := f.arrays(a, 0)
	if err != nil {
		return err
	}
	w.line("")
	w.line("[%swavelength]", prefix)
	f.draftWave(w, g, &a.wave, medium)
	w.line("")
	w.line("[%sflux]", prefix)
	f.writePlace(w, a.flux)
	if a.fluxUnit != "" {
		w.line("unit = %s", quoteTOML(a.fluxUnit))
	}
	if a.points.isSet() {
		w.line("points = %s   # how many pixels are in use", numberName(a.points))
	}
	kind := a.weightRole
	if a.weight.isSet() {
		if kind == roleWeight {
			kind, _ = weightByScatter(medianPositive(arr.weight), scatter(arr.flux))
		}
		w.line("")
		w.line("[%sweight]", prefix)
		f.writePlace(w, a.weight)
		w.line("kind = %s", quoteTOML(key(weightKinds, func(r role) bool { return r == kind })))
		if a.upper.isSet() {
			w.line("upper = %s   # errors towards higher flux", columnName(a.upper.hdu, a.upper.col))
		}
	}
	f.draftMasks(w, prefix, a, arr, kind)
	f.draftResolution(w, prefix, a)
	return nil
}

func (f *File) draftWave(w *writer, g *group, p *wavePlan, medium string) {
	switch {
	case p.axis != nil:
		w.line("hdu = %s", f.reference(p.axisHDU))
		w.line("axis = true   # the cards of the spectral axis")
	case p.fixed != nil:
		w.line("hdu = %s", f.reference(g.arms[0].flux.hdu))
		w.line("axis = true   # a table that the axis names")
	case p.start.isSet():
		w.line("hdu = %s", f.reference(p.start.hdu))
		w.line("start = %s", numberName(p.start))
		w.line("step = %s", numberName(p.step))
	default:
		f.writePlace(w, p.values)
	}
	if p.axis == nil && p.fixed == nil {
		if p.unitKnown {
			base := p.unit
			base.scale = linear
			w.line("unit = %s", quoteTOML(base.String()))
			if p.unit.scale != linear {
				w.line("scale = %s", quoteTOML(key(scaleKinds, func(s scale) bool { return s == p.unit.scale })))
			}
		} else {
			w.line(`# unit = "Angstrom"   # not stated: guessed from the numbers of each spectrum`)
		}
	}
	switch {
	case p.mediumKnown && p.axis == nil && p.fixed == nil:
		w.line("medium = %s   # %s", quoteTOML(p.medium.String()), strings.Map(printable, p.mediumWhy))
	case p.mediumKnown || g.obs.mediumKnown:
		w.line("# The headers say air or vacuum.")
	default:
		w.line("# medium = %s   # not stated, and assumed for each spectrum by its wavelengths", quoteTOML(medium))
	}
}

// draftMasks writes the masks that count for the first spectrum: in a layout they
// always do.
func (f *File) draftMasks(w *writer, prefix string, a *arm, arr rawArrays, weight role) {
	ivar := make([]float64, len(arr.flux))
	stated := arr.weight != nil && len(arr.weight) == len(ivar) && (weight == roleIvar || !allZero(arr.weight))
	if stated {
		copy(ivar, arr.weight)
		toIvar(ivar, weight)
	} else {
		ones(ivar, len(ivar))
	}
	for i, v := range arr.flux {
		if v-v != 0 {
			ivar[i] = 0
		}
	}
	marksBad := stated && (weight == roleIvar || hasZero(ivar))
	for k, m := range a.masks {
		if len(arr.masks[k]) != len(ivar) || !m.counts(ivar, arr.masks[k], marksBad) {
			w.line("")
			w.line("# %s is not used as a mask: it takes too much or marks what the weights do.", m.at)
			continue
		}
		applyMask(ivar, arr.masks[k], m, marksBad)
		w.line("")
		w.line("[[%smasks]]", prefix)
		f.writePlace(w, m.at)
		bad := "nonzero"
		if m.role == roleGood {
			bad = "zero"
		}
		w.line("bad = %s", quoteTOML(bad))
		if m.bits != 0 {
			w.line("bits = %d   # only these", m.bits)
		}
	}
}

func (f *File) draftResolution(w *writer, prefix string, a *arm) {
	switch {
	case a.kernel.isSet():
		w.line("")
		w.line("[%sresolution]", prefix)
		f.writePlace(w, a.kernel)
		w.line(`kind = "kernel"   # line spread functions`)
	case a.resolution.isSet():
		w.line("")
		w.line("[%sresolution]", prefix)
		f.writePlace(w, a.resolution)
		w.line("kind = %s", quoteTOML(key(resKinds, func(r role) bool { return r == a.resRole })))
		if a.powerWave.isSet() {
			w.line("wavelength = %s", numberName(a.powerWave))
		}
	case a.power > 0:
		w.line("")
		w.line("[%sresolution]", prefix)
		w.line("power = %g", a.power)
	default:
		w.line("")
		w.line("# [%sresolution]", prefix)
		w.line("# power = 2000.0   # wavelength / FWHM; or table = [[4000.0, 1500.0], [9000.0, 2200.0]]")
	}
}

func (f *File) draftObject(w *writer) {
	p := f.plan
	id, ra, dec := p.id, p.ra, p.dec
	if p.targets != nil && !id.isSet() {
		at := func(c *column) place {
			if c == nil {
				return place{}
			}
			return place{hdu: p.targets, col: c}
		}
		c0, c1, c2 := targetColumns(p.targets)
		id, ra, dec = at(c0), at(c1), at(c2)
	}
	w.line("")
	var h *hdu
	for _, pl := range []place{id, ra, dec} {
		if pl.isSet() && h == nil {
			h = pl.hdu
		}
	}
	if h == nil {
		w.line("# Name and position come from the usual cards, or from the file's name.")
		return
	}
	w.line("[object]")
	w.line("hdu = %s", f.reference(h))
	if id.isSet() {
		w.line("id = %s", numberName(id))
	}
	if ra.isSet() && dec.isSet() {
		w.line("ra = %s", numberName(ra))
		w.line("dec = %s", numberName(dec))
	}
}
