package fitsread

import (
	"fmt"
	"sort"
	"strings"
)

// findHDU resolves a number or an EXTNAME.
func findHDU(hdus []*hdu, ref any) *hdu {
	switch v := ref.(type) {
	case int64:
		if v >= 0 && v < int64(len(hdus)) {
			return hdus[v]
		}
	case string:
		for _, h := range hdus {
			if strings.EqualFold(h.name, v) {
				return h
			}
		}
	}
	return nil
}

// column finds a column: by name, the case counting first; "#3" is the third one;
// "utype:Data.FluxAxis.Value" and "ucd:em.wl" go by the ends of TUTYPn and the
// beginnings of TUCDn.
func (h *hdu) column(name string) *column {
	kind, what, tagged := strings.Cut(strings.ToLower(name), ":")
	for i := range h.columns {
		c := &h.columns[i]
		switch {
		case tagged && kind == "utype" && (c.utype == what || strings.HasSuffix(c.utype, "."+what) || strings.HasSuffix(c.utype, ":"+what)),
			tagged && kind == "ucd" && (c.ucd == what || strings.HasPrefix(c.ucd, what+";")),
			name == fmt.Sprintf("#%d", c.number):
			return c
		}
	}
	for i := range h.columns {
		if h.columns[i].name == name {
			return &h.columns[i]
		}
	}
	for i := range h.columns {
		if strings.EqualFold(h.columns[i].name, name) {
			return &h.columns[i]
		}
	}
	return nil
}

// hasMatch reports whether the layout says which files it is for. One that does
// not is for any file that has its HDUs, columns and cards.
func (l *Layout) hasMatch() bool { return l.doc.Match.HDU != nil || len(l.doc.Match.Cards) > 0 }

// matches reports whether a file is of the layout's kind: the HDU, its columns
// and the cards that [match] names are there.
func (l *Layout) matches(hdus []*hdu) bool {
	m := &l.doc.Match
	in := []*hdu{hdus[0]}
	if m.HDU != nil {
		h := findHDU(hdus, m.HDU)
		if h == nil {
			return false
		}
		for _, c := range m.Columns {
			if h.column(c) == nil {
				return false
			}
		}
		in = append(in, h)
	}
	keys := make([]string, 0, len(m.Cards))
	for k := range m.Cards {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		c, ok := findCard(in, strings.ToUpper(k))
		if !ok || m.Cards[k] != "" && c.value() != m.Cards[k] {
			return false
		}
	}
	return true
}

// planFor binds a user's layout to the file's HDUs and columns.
func (f *File) planFor(l *Layout) (*plan, error) {
	p := &plan{layout: l.Name, why: "its [match] fits the file", digest: l.digest}
	if !l.hasMatch() {
		p.why = "it fits the file"
	}
	if f.opts.Force != "" {
		p.why = "it was asked for"
	}
	g := group{name: l.Name, rows: 1}
	for i := range l.doc.Arm {
		a, err := f.bindArm(&l.doc.Arm[i])
		if err != nil {
			return nil, err
		}
		rows := int64(1)
		if a.flux.perRow() {
			if rows = a.flux.hdu.lines(); a.flux.lines > 0 {
				rows = a.flux.lines
			}
		}
		if i > 0 && rows != g.rows {
			return nil, fault(ErrLayout, a.flux.hdu.index, "correct the layout", "arm %q has %d spectra, the arms before it %d", a.name, rows, g.rows)
		}
		g.rows = rows
		g.arms = append(g.arms, a)
	}
	if l.doc.Rows == "orders" {
		g.rows, g.orders = 1, g.rows
	}
	p.groups = []group{g}
	if o := l.doc.Object; o != nil {
		h := findHDU(f.hdus, o.HDU)
		if h == nil {
			return nil, missingHDU("object", o.HDU)
		}
		for _, b := range []struct {
			name string
			to   *place
		}{{o.ID, &p.id}, {o.RA, &p.ra}, {o.Dec, &p.dec}} {
			if b.name == "" {
				continue
			}
			var err error
			if *b.to, err = numberPlace(h, b.name); err != nil {
				return nil, err
			}
		}
	}
	if l.doc.Frame != nil {
		fr := frameKinds[l.doc.Frame.Velocity]
		p.frame = &fr
	}
	return p, nil
}

func missingHDU(key string, ref any) *ReadError {
	return fault(ErrLayout, -1, "correct the layout or leave the file out", "%s.hdu: the file has no HDU %v", key, ref)
}

// numberPlace finds a column or card of that name.
func numberPlace(h *hdu, name string) (place, error) {
	if c := h.column(name); c != nil {
		return place{hdu: h, col: c}, nil
	}
	if _, ok := h.header.find(strings.ToUpper(name)); ok {
		return place{hdu: h, card: strings.ToUpper(name)}, nil
	}
	return place{}, fault(ErrLayout, h.index, "correct the layout or leave the file out", "there is no column or card %q", name)
}

// arrayPlace finds a column, an image line, or the object's own line.
func (f *File) arrayPlace(key string, d placeDoc) (place, error) {
	name, line := d.Column, d.Line
	h := findHDU(f.hdus, d.HDU)
	if h == nil {
		return place{}, missingHDU(key, d.HDU)
	}
	const hint = "correct the layout or leave the file out"
	if h.kind == kindCompressed || h.kind == kindPacked {
		return place{}, compressedFault(h)
	}
	if name != "" {
		c := h.column(name)
		if c == nil || !c.numeric() {
			return place{}, fault(ErrLayout, h.index, hint, "%s: there is no column of numbers %q", key, name)
		}
		return place{hdu: h, col: c}, nil
	}
	if h.kind != kindImage || h.pixels() == 0 {
		return place{}, fault(ErrLayout, h.index, hint, "%s: this HDU is no image, so a column must be named", key)
	}
	if line > h.lines() {
		return place{}, fault(ErrLayout, h.index, hint, "%s: line %d of an image of %d lines", key, line, h.lines())
	}
	if d.Plane > 0 {
		rows := int64(1)
		if len(h.axes) > 1 {
			rows = h.axes[1]
		}
		if d.Plane > h.lines()/max(rows, 1) {
			return place{}, fault(ErrLayout, h.index, hint, "%s: plane %d of an image of %d planes", key, d.Plane, h.lines()/max(rows, 1))
		}
		return place{hdu: h, line: eachLine, base: (d.Plane - 1) * rows, lines: rows}, nil
	}
	return place{hdu: h, line: line - 1}, nil // line 0 becomes eachLine
}

func (f *File) bindArm(d *armDoc) (arm, error) {
	a := arm{name: d.Name}
	var err error
	if a.flux, err = f.arrayPlace("flux", d.Flux.placeDoc); err != nil {
		return a, err
	}
	switch {
	case d.Flux.Unit != "":
		a.fluxUnit = d.Flux.Unit
	case a.flux.col != nil:
		a.fluxUnit = a.flux.col.unit
	default:
		a.fluxUnit = a.flux.hdu.header.text("BUNIT")
	}
	if a.wave, err = f.bindWave(d.Wavelength, a.flux); err != nil {
		return a, err
	}
	if w := d.Weight; w != nil {
		a.weightRole = weightKinds[w.Kind]
		if a.weight, err = f.arrayPlace("weight", w.placeDoc); err != nil {
			return a, err
		}
		if w.Upper != "" {
			if a.upper, err = f.arrayPlace("weight", placeDoc{HDU: w.HDU, Column: w.Upper}); err != nil {
				return a, err
			}
		}
	}
	for _, m := range d.masks() {
		mp := maskPlan{role: badKinds[m.Bad], bits: m.Bits, stated: true}
		if mp.at, err = f.arrayPlace("mask", m.placeDoc); err != nil {
			return a, err
		}
		if mp.at.col != nil {
			mp.at.col = mp.at.col.asFlags(a.flux.col != nil && !a.flux.col.isVector())
		}
		a.masks = append(a.masks, mp)
	}
	if d.Flux.Points != "" {
		if a.points, err = numberPlace(a.flux.hdu, d.Flux.Points); err != nil {
			return a, err
		}
	}
	if d.Resolution != nil {
		err = f.bindResolution(&a, d.Resolution)
	}
	return a, err
}

func (f *File) bindResolution(a *arm, r *resDoc) error {
	a.power, a.powers = r.Power, r.Table
	if r.HDU == nil {
		return nil
	}
	at, err := f.arrayPlace("resolution", r.placeDoc)
	if err != nil {
		return err
	}
	if a.resRole = resKinds[r.Kind]; a.resRole == roleKernel {
		if len(at.hdu.axes) != 3 || at.hdu.tiles == nil && at.col != nil {
			return fault(ErrLayout, at.hdu.index, "correct the layout or leave the file out", "resolution: kernels are an image of pixels, offsets and objects")
		}
		a.kernel, a.resRole = at, roleDisp
		return nil
	}
	a.resolution = at
	if r.Wavelength != "" {
		a.powerWave, err = f.arrayPlace("resolution", placeDoc{HDU: r.HDU, Column: r.Wavelength})
	}
	return err
}

func (f *File) bindWave(d *waveDoc, flux place) (wavePlan, error) {
	h := findHDU(f.hdus, d.HDU)
	if h == nil {
		return wavePlan{}, missingHDU("wavelength", d.HDU)
	}
	var w wavePlan
	var err error
	switch {
	case d.Axis:
		if cells, ok := cellAxis(h, flux.col); ok && flux.hdu == h {
			w = cells
			break
		}
		ax, ok, err := f.imageAxis(h)
		if err == nil && !ok {
			err = fmt.Errorf("the header describes no spectral axis")
		}
		if err != nil {
			return w, fault(ErrLayout, h.index, "correct the layout or leave the file out", "wavelength: %v", err)
		}
		if ax.algorithm == "TAB" {
			if w, err = f.tableAxis(h, ax); err != nil {
				return w, fault(ErrLayout, h.index, "correct the layout or leave the file out", "wavelength: the table of the axis cannot be used: %v", err)
			}
			break
		}
		w = axisWave(&ax, h)
	case d.Start != "":
		w.unit = unitAngstrom
		if w.start, err = numberPlace(h, d.Start); err != nil {
			return w, err
		}
		if w.step, err = numberPlace(h, d.Step); err != nil {
			return w, err
		}
	default:
		if w.values, err = f.arrayPlace("wavelength", d.placeDoc); err != nil {
			return w, err
		}
		if c := w.values.col; c != nil {
			w.describe(c.name, c.unit, c.ucd, c.comment)
		} else {
			w.describe("wavelength", h.header.text("BUNIT"), "", "")
		}
	}
	if d.Unit != "" {
		w.unit, _ = parseUnit(d.Unit)
		w.unitKnown = true
	}
	if d.Scale != "" {
		w.unit.scale = scaleKinds[d.Scale]
		w.unitKnown = w.unitKnown || w.unit.scale != linear
	}
	if w.axis != nil {
		w.axis.unit = w.unit
	}
	if d.Medium != "" {
		w.medium, w.mediumKnown, w.mediumWhy = mediumKinds[d.Medium], true, "the layout"
	}
	return w, nil
}
