package fitsread

import (
	"fmt"
	"strings"

	"duskline/spectrum"
)

// place says where an array or a number stands in the file.
type place struct {
	hdu   *hdu
	col   *column // nil for an image
	line  int64   // image line; eachLine: the object's own
	base  int64   // line of the first object, where line is eachLine
	lines int64   // lines of objects, where there are several planes of them; 0 for all
	card  string  // a header card: numbers only
}

const eachLine = -1

// isSet reports whether the place is one at all.
func (p place) isSet() bool { return p.hdu != nil }

// String names the place for people.
func (p place) String() string {
	switch {
	case !p.isSet():
		return ""
	case p.card != "":
		return fmt.Sprintf("card %s of HDU %d", p.card, p.hdu.index)
	case p.col != nil:
		return fmt.Sprintf("column %s of HDU %d", p.col.name, p.hdu.index)
	case p.hdu.lines() == 1:
		return fmt.Sprintf("image in HDU %d", p.hdu.index)
	case p.line == eachLine && p.lines > 0:
		return fmt.Sprintf("plane %d of the image in HDU %d", p.base/p.lines+1, p.hdu.index)
	case p.line == eachLine:
		return fmt.Sprintf("lines of the image in HDU %d", p.hdu.index)
	}
	return fmt.Sprintf("line %d of the image in HDU %d", p.line+1, p.hdu.index)
}

// perRow reports whether each row or line of the place is another array.
func (p place) perRow() bool {
	if p.col != nil {
		return p.col.isVector()
	}
	return p.line == eachLine && p.hdu.lines() > 1 && p.lines != 1
}

// array reads the values for one row: a vector cell, an image line, or the
// whole of a column with one value a row. A place with a single row serves all.
func (f *File) array(p place, row int64) ([]float64, error) {
	switch {
	case p.col == nil:
		line := p.line
		if line == eachLine {
			line = p.base + row
			if p.hdu.lines() == 1 {
				line = 0
			}
		}
		return f.imageLine(p.hdu, line*p.hdu.pixels(), p.hdu.pixels())
	case p.col.isVector():
		if p.hdu.lines() == 1 {
			row = 0
		}
		return f.cell(p.hdu, p.col, row)
	}
	v, err := f.scalarColumns(p.hdu, []*column{p.col})
	if err != nil {
		return nil, err
	}
	return v[0], nil
}

// number reads one number: a card, or a scalar cell of the row.
func (f *File) number(p place, row int64) (float64, bool) {
	switch {
	case !p.isSet():
		return 0, false
	case p.card != "":
		return p.hdu.header.number(p.card)
	case p.col == nil || p.col.isVector() || !p.col.numeric():
		return 0, false
	}
	if p.hdu.lines() == 1 {
		row = 0
	}
	v, err := f.cell(p.hdu, p.col, row)
	if err != nil || len(v) != 1 || v[0] != v[0] {
		return 0, false
	}
	return v[0], true
}

// word reads an identifier: a card, or a cell of the row.
func (f *File) word(p place, row int64) string {
	switch {
	case !p.isSet():
		return ""
	case p.card != "":
		return strings.TrimSpace(p.hdu.header.text(p.card))
	case p.col == nil || p.col.heap != 0:
		return ""
	}
	if p.hdu.lines() == 1 {
		row = 0
	}
	if p.hdu.broken != nil {
		return ""
	}
	raw, _, err := f.cellBytes(p.hdu, p.col, row)
	if err != nil {
		return ""
	}
	return p.col.text(raw)
}

// wavePlan says how to get the wavelengths of an arm.
type wavePlan struct {
	values      place     // an array, or
	start, step place     // numbers beside a vector, or
	axis        *axis     // header cards, or
	fixed       []float64 // worked out from a table when the file was opened
	axisHDU     *hdu
	cells       *column // the axis cards are of this column's arrays
	unit        spectralUnit
	unitKnown   bool
	medium      spectrum.Medium
	mediumKnown bool
	mediumWhy   string
	atRest      bool // the name says rest frame
}

// String names where the wavelengths come from.
func (w wavePlan) String() string {
	switch {
	case w.cells != nil:
		return fmt.Sprintf("axis cards of column %s of HDU %d", w.cells.name, w.axisHDU.index)
	case w.axis != nil:
		return fmt.Sprintf("axis cards of HDU %d", w.axisHDU.index)
	case w.fixed != nil:
		return "table of an axis: " + w.values.String()
	case w.start.isSet():
		return fmt.Sprintf("start and step: %s, %s", w.start, w.step)
	}
	return w.values.String()
}

// arm is one piece of a spectrum: where its arrays stand.
type arm struct {
	name       string
	wave       wavePlan
	flux       place
	fluxUnit   string
	weight     place
	weightRole role  // roleSigma, roleVariance, roleIvar or roleWeight
	upper      place // errors towards higher flux, where weight has those towards lower
	masks      []maskPlan
	resolution place
	resRole    role         // rolePower, roleFWHM or roleDisp
	kernel     place        // image of line spread functions, a plane an object
	power      float64      // one resolving power for all pixels
	powers     [][2]float64 // wavelengths in Angstrom and resolving powers to interpolate
	powerWave  place        // wavelengths of resolution where it has its own
	points     place
}

// maskPlan says where flags stand and what they mean.
type maskPlan struct {
	at     place
	role   role  // roleMask, roleQuality or roleGood
	bits   int64 // bits that are bad, 0 for all
	stated bool  // a layout says so: applied whatever it takes
}

// group is a set of arms that make up each of its spectra.
type group struct {
	name    string
	arms    []arm
	rows    int64  // spectra in it
	orders  int64  // > 0: so many rows are segments of the one spectrum
	headers []*hdu // that speak for it, most specific first
	obs     observation
}

// plan is the whole decision of how a file is read.
type plan struct {
	layout  string // its name
	why     string
	groups  []group
	guesses []string // becomes LayoutAssumed
	skipped []string
	targets *hdu            // table with one row per spectrum: names and positions
	id      place           // as a layout gives it
	ra, dec place           // as a layout gives it
	frame   *spectrum.Frame // as a layout gives it
	digest  string          // of the layout's text, "" for built-in ones
}

// count returns the number of spectra.
func (p *plan) count() int64 {
	var n int64
	for _, g := range p.groups {
		n += g.rows
	}
	return n
}

// locate finds group and row of spectrum i.
func (p *plan) locate(i int64) (*group, int64) {
	for k := range p.groups {
		if i < p.groups[k].rows {
			return &p.groups[k], i
		}
		i -= p.groups[k].rows
	}
	return nil, 0
}
