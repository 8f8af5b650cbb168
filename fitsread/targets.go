package fitsread

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
)

// Columns that name a target and its place in a table with a row a spectrum,
// reduced to letters and digits, best first.
var (
	idColumns  = strings.Fields("targetid objectid objid specobjid sourceid obsid uniqueid id object name targname target")
	raColumns  = strings.Fields("targetra raj2000 ra radeg raobj plugra rafiber fiberra")
	decColumns = strings.Fields("targetdec dej2000 dec decdeg decobj plugdec decfiber fiberdec")
)

// targetColumns finds the columns of name and position in a table.
func targetColumns(h *hdu) (id, ra, dec *column) {
	find := func(names []string, ok func(*column) bool) *column {
		for _, want := range names {
			for i := range h.columns {
				if c := &h.columns[i]; bare(c.name) == want && !c.bad && !c.isVector() && ok(c) {
					return c
				}
			}
		}
		return nil
	}
	isName := func(c *column) bool { return strings.IndexByte("ABIJK", c.code) >= 0 && c.repeat > 0 }
	return find(idColumns, isName), find(raColumns, (*column).numeric), find(decColumns, (*column).numeric)
}

// findTargets looks for the table that says which objects the rows are: that of
// the spectra itself, else the first with as many rows.
func (f *File) findTargets() {
	p := f.plan
	if len(p.groups) != 1 || p.groups[0].rows < 1 {
		return
	}
	g := &p.groups[0]
	tables := []*hdu{g.arms[0].flux.hdu}
	for _, h := range f.hdus {
		if g.rows > 1 {
			tables = append(tables, h)
		}
	}
	for _, h := range tables {
		if h.kind != kindTable || h.broken != nil || h.missing > 0 || h.axes[1] != g.rows {
			continue
		}
		if g.rows == 1 && !g.arms[0].flux.col.isVector() {
			continue
		}
		if id, ra, dec := targetColumns(h); id != nil || ra != nil && dec != nil {
			p.targets = h
			return
		}
	}
}

// idCards hold identifiers that are unique within a survey. Names of targets are
// not among them: several spectra share them.
var idCards = []string{"OBJECT_ID", "OBJECTID", "TARGETID", "SPEC_ID", "SPECOBJID", "OBJNO", "DS_IDENT", "DS_IDPUB"}

// identify returns what the spectrum is called: by the layout, by the table of
// targets, by an identifier card, else the file's name and, where it has several
// spectra, the row.
func (f *File) identify(g *group, i, row int64) string {
	p := f.plan
	if s := f.word(p.id, row); s != "" {
		return s
	}
	if p.targets != nil {
		if id, _, _ := targetColumns(p.targets); id != nil {
			if s := f.word(place{hdu: p.targets, col: id}, row); s != "" {
				return s
			}
		}
	}
	several := p.count() > 1
	if !several {
		for _, key := range idCards {
			if c, ok := findCard(g.headers, key); ok {
				if s := strings.TrimSpace(c.value()); s != "" && s != "0" {
					return s
				}
			}
		}
	}
	stem := filepath.Base(f.path)
	stem = strings.TrimSuffix(strings.TrimSuffix(stem, ".gz"), ".fz")
	if ext := filepath.Ext(stem); strings.EqualFold(ext, ".fits") || strings.EqualFold(ext, ".fit") || strings.EqualFold(ext, ".fts") {
		stem = strings.TrimSuffix(stem, ext)
	}
	if several {
		return fmt.Sprintf("%s#%d", stem, i)
	}
	return stem
}

// position returns the object's place in degrees, NaN when not known.
func (f *File) position(g *group, row int64) (ra, dec float64) {
	p := f.plan
	if ra, dec, ok := f.placedPosition(p.ra, p.dec, row); ok {
		return ra, dec
	}
	if p.targets != nil {
		if _, c1, c2 := targetColumns(p.targets); c1 != nil && c2 != nil {
			at := func(c *column) place { return place{hdu: p.targets, col: c} }
			if ra, dec, ok := f.placedPosition(at(c1), at(c2), row); ok {
				return ra, dec
			}
		}
		if p.count() > 1 {
			return math.NaN(), math.NaN() // the header's is the telescope's
		}
	}
	return cardPosition(g.headers)
}

// placedPosition reads a position in degrees, or in sexagesimal form, from cells
// or cards.
func (f *File) placedPosition(raAt, decAt place, row int64) (ra, dec float64, ok bool) {
	if !raAt.isSet() || !decAt.isSet() {
		return 0, 0, false
	}
	ra, ok1 := f.number(raAt, row)
	dec, ok2 := f.number(decAt, row)
	if !ok1 {
		ra, ok1 = sexagesimal(f.word(raAt, row))
		ra *= 15
	}
	if !ok2 {
		dec, ok2 = sexagesimal(f.word(decAt, row))
	}
	return ra, dec, ok1 && ok2 && validPosition(ra, dec)
}
