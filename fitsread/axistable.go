package fitsread

import (
	"fmt"
	"math"
	"strings"
)

// tableAxis resolves a -TAB axis (FITS Paper III, section 6): PSn_0 names the
// extension, PSn_1 the column of coordinates and PSn_2, where there is one, that
// of the index; PVn_1 and PVn_2 its EXTVER and EXTLEVEL, PVn_3 which coordinate
// of several it is, of which only the first and only is supported. A pixel has
// the index psi = CRVAL + CDELT (p - CRPIX), which the index array turns into a
// place in the coordinate array; between places coordinates are linear.
func (f *File) tableAxis(h *hdu, ax axis) (wavePlan, error) {
	card := func(stem string, m int) string { return fmt.Sprintf("%s%d_%d%s", stem, ax.number, m, ax.alt) }
	if v, ok := h.header.integer(card("PV", 3)); ok && v != 1 {
		return wavePlan{}, fmt.Errorf("%s = %d: it has coordinates of several axes", card("PV", 3), v)
	}
	t := f.axisTable(h, card("PS", 0), card("PV", 1))
	if t == nil {
		return wavePlan{}, fmt.Errorf("there is no table %q", h.header.text(card("PS", 0)))
	}
	array := func(key string) ([]float64, *column, error) {
		c := t.column(h.header.text(key))
		if c == nil || !c.numeric() || c.flags {
			return nil, nil, fmt.Errorf("there is no column %q of numbers", h.header.text(key))
		}
		if c.isVector() {
			v, err := f.cell(t, c, 0)
			return v, c, err
		}
		v, err := f.scalarColumns(t, []*column{c})
		if err != nil {
			return nil, nil, err
		}
		return v[0], c, nil
	}
	coords, col, err := array(card("PS", 1))
	if err != nil {
		return wavePlan{}, err
	}
	var index []float64
	if h.header.text(card("PS", 2)) != "" {
		if index, _, err = array(card("PS", 2)); err != nil {
			return wavePlan{}, err
		}
		if len(index) != len(coords) {
			return wavePlan{}, fmt.Errorf("%d indices for %d coordinates", len(index), len(coords))
		}
	}
	w := columnWave(t, col)
	if ax.unitKnown && (!w.unitKnown || h.header.text(fmt.Sprintf("CUNIT%d%s", ax.number, ax.alt)) != "") {
		w.unit, w.unitKnown = ax.unit, true // Paper III: CUNIT holds for the coordinates
	}
	if err := f.checkPixels(h, h.pixels()); err != nil {
		return wavePlan{}, err
	}
	w.fixed = make([]float64, h.pixels())
	for i := range w.fixed {
		psi := ax.value + ax.step*(float64(i+1)-ax.pixel)
		w.fixed[i] = tableCoordinate(coords, index, psi)
	}
	ax.algorithm = ""
	w.medium, w.mediumKnown = ax.medium()
	w.mediumWhy = "CTYPE"
	return w, nil
}

// axisTable finds the table of a -TAB axis by its name and, where it is given,
// its EXTVER.
func (f *File) axisTable(h *hdu, nameKey, versionKey string) *hdu {
	name := h.header.text(nameKey)
	want, stated := h.header.integer(versionKey)
	for _, t := range f.hdus {
		if t.kind != kindTable || t.broken != nil || t.axes[1] < 1 || name == "" || !strings.EqualFold(t.name, name) {
			continue
		}
		if have, ok := t.header.integer("EXTVER"); stated && ok && have != want {
			continue
		}
		return t
	}
	return nil
}

// tableCoordinate interpolates: psi is a place in the coordinates, counted from 1,
// or a value of the index, which runs in one direction. Up to half a place beyond
// the ends the coordinates go on linearly; further out the result is NaN.
func tableCoordinate(coords, index []float64, psi float64) float64 {
	place := psi
	if index != nil {
		if place = indexPlace(index, psi); place != place {
			return place
		}
	}
	n := len(coords)
	if n == 1 && math.Abs(place-1) <= 0.5 {
		return coords[0]
	}
	if n < 2 || !(place >= 0.5 && place <= float64(n)+0.5) {
		return math.NaN()
	}
	k := min(max(int(place)-1, 0), n-2)
	u := place - float64(k+1)
	return coords[k] + u*(coords[k+1]-coords[k])
}

// indexPlace returns where psi lies in the index, counted from 1.
func indexPlace(index []float64, psi float64) float64 {
	n := len(index)
	if n == 1 {
		if index[0] == psi {
			return 1
		}
		return math.NaN()
	}
	k := 0
	for k < n-2 && (psi-index[k+1])*(index[n-1]-index[0]) > 0 {
		k++
	}
	step := index[k+1] - index[k]
	if step == 0 {
		return math.NaN()
	}
	return float64(k+1) + (psi-index[k])/step
}
