package fitsread

import (
	"math"
	"strings"
)

// draftUnknown guesses at a file that is not understood.
func draftUnknown(path string, opts Options, why error) (d Draft, err error) {
	opts.MaxPixels, opts.MaxUnpacked = max(opts.MaxPixels, 1<<22), max(opts.MaxUnpacked, 1<<30)
	f := &File{path: path, opts: opts}
	defer f.guard(&err)
	if f.src, err = openSource(path, opts.MaxUnpacked); err != nil {
		return d, err
	}
	defer f.src.close()
	if f.hdus, err = walk(f.src, f.src.size); err != nil {
		return d, err
	}
	var w writer
	w.line("# A first draft of a layout for %s, which duskline did not understand:", strings.Map(printable, fileName(path)))
	w.line("# %s", strings.Map(printable, why.Error()))
	w.line("# Look at the lines marked EDIT, then: duskline peek --layout THIS.toml FILE")
	w.line("# What is in the file:")
	for _, h := range f.hdus {
		info := h.info(nil)
		w.line("#   HDU %d %s, %s, %s %s", h.index, strings.Map(printable, h.name), info.Kind, info.Shape, strings.Map(printable, info.Problem))
		for _, c := range info.Columns {
			w.line("#     %s", strings.Map(printable, strings.TrimSpace(c.Name+"  "+c.Format+"  "+c.Unit+"  "+c.UCD)))
		}
	}
	w.line("")
	for _, h := range f.hdus {
		if h.broken == nil && (h.kind == kindTable || h.kind == kindASCII) && h.axes[1] > 0 && f.guessColumns(&w, h) {
			return Draft{Text: w.String()}, nil
		}
		if h.kind == kindImage && h.pixels() > 1 && h.lines() > 0 {
			f.guessImage(&w, h)
			return Draft{Text: w.String()}, nil
		}
	}
	return d, fault(ErrNoSpectrum, -1, "check what it is", "no HDU holds an array of numbers that can be read")
}

// guessColumns writes a draft for a table; false where it has too few columns of
// numbers.
func (f *File) guessColumns(w *writer, h *hdu) bool {
	byShape := map[int64][]*column{}
	var best int64
	for i := range h.columns {
		c := &h.columns[i]
		if !c.numeric() || c.code == 'X' || c.code == 'L' || !c.isVector() && h.axes[1] < 2 {
			continue
		}
		n := c.values()
		if byShape[n] = append(byShape[n], c); len(byShape[n]) > 1 && (best == 0 || n > best) {
			best = n
		}
	}
	cols := byShape[best]
	if len(cols) < 2 {
		return false
	}
	wave, flux := cols[0], cols[1]
	for _, c := range cols {
		if v, err := f.array(place{hdu: h, col: c}, 0); err == nil && runsInOrder(v) {
			wave = c
			break
		}
	}
	for _, c := range cols {
		if c != wave {
			flux = c
			break
		}
	}
	ref := f.reference(h)
	w.line("[wavelength]")
	w.line("hdu = %s   # EDIT: the HDU of the wavelengths", ref)
	w.line("column = %s   # EDIT: their column", columnName(h, wave))
	if u, known := parseUnit(wave.unit); known {
		u.scale = linear
		w.line("unit = %s", quoteTOML(u.String()))
	} else {
		w.line(`unit = "Angstrom"   # EDIT: Angstrom nm micron m Hz eV cm-1; and scale = "log10" if they are logarithms`)
	}
	w.line("")
	w.line("[flux]")
	w.line("hdu = %s   # EDIT: the HDU of the fluxes", ref)
	w.line("column = %s   # EDIT: their column", columnName(h, flux))
	w.line("")
	w.line("# [weight]   # EDIT: if there are errors; kind is sigma, variance or inverse_variance")
	w.line("# hdu = %s", ref)
	w.line(`# column = "ERROR"`)
	w.line(`# kind = "sigma"`)
	return true
}

// guessImage writes a draft for an image.
func (f *File) guessImage(w *writer, h *hdu) {
	ref := f.reference(h)
	w.line("[wavelength]")
	w.line("hdu = %s   # EDIT: the HDU of the wavelengths", ref)
	_, hasStart := h.header.find("CRVAL1")
	_, hasStep := h.header.find("CDELT1")
	switch {
	case hasStart && hasStep:
		w.line(`start = "CRVAL1"   # EDIT: card with the wavelength of the first pixel`)
		w.line(`step = "CDELT1"   # EDIT: card with the step`)
	case h.lines() > 1:
		w.line("line = 1   # EDIT: line of the wavelengths, or start and step: cards of the first one and the step")
	default:
		w.line(`# start = "CRVAL1"   # EDIT: cards with the wavelength of the first pixel and the step`)
		w.line(`# step = "CDELT1"`)
	}
	w.line(`unit = "Angstrom"   # EDIT: Angstrom nm micron m Hz eV cm-1; and scale = "log10" if they are logarithms`)
	w.line("")
	w.line("[flux]")
	w.line("hdu = %s   # EDIT: the HDU of the fluxes", ref)
	if h.lines() > 1 {
		w.line("line = 2   # EDIT: line of the fluxes; leave it out where each line is an object")
	}
}

// runsInOrder is monotonic but for values that are missing.
func runsInOrder(v []float64) bool {
	clean := v[:0:0]
	for _, x := range v {
		if x > 0 && !math.IsInf(x, 0) {
			clean = append(clean, x)
		}
	}
	return len(clean) > len(v)/2 && monotonic(clean)
}
