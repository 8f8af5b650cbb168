package fitsread

import (
	"fmt"
	"sort"
	"strings"

	"duskline/spectrum"
)

// ranked is a column with what it seems to hold.
type ranked struct {
	col  *column
	role role
	rank int
}

// telling is what tells which columns are wavelength and flux.
type telling int

const (
	byNames telling = iota
	byUCDs          // utypes and UCDs
	byClass         // the same or names, in tables that VOCLASS calls spectra
)

// roles tells the columns' roles, best first. UCDs and utypes go before names.
func (h *hdu) roles(by telling) []ranked {
	var out []ranked
	for i := range h.columns {
		c := &h.columns[i]
		if !c.numeric() {
			continue
		}
		r := ranked{col: c}
		if by != byNames {
			var certain bool
			r.role, certain = roleOfUCD(c.utype, c.ucd)
			if !certain {
				r.rank = 1
			}
		}
		if r.role == roleNone {
			wr := roleOfName(c.name)
			r.role, r.rank = wr.role, 10+wr.rank
			if by == byUCDs && (r.role == roleWave || r.role == roleFlux) {
				continue
			}
		}
		if r.role != roleNone {
			out = append(out, r)
		}
	}
	sort.SliceStable(out, func(i, j int) bool { return out[i].rank < out[j].rank })
	return out
}

func (f *File) findClassed() (*plan, error) {
	return f.findTables(byClass, "VOCLASS says that the table is a spectrum")
}

func (f *File) findIVOA() (*plan, error) {
	return f.findTables(byUCDs, "columns carry IVOA utypes or UCDs")
}

func (f *File) findNamed() (*plan, error) {
	return f.findTables(byNames, "columns are named as wavelength and flux")
}

func (f *File) findTables(by telling, why string) (*plan, error) {
	var cands []candidate
	var firstErr error
	for _, h := range f.hdus {
		if h.kind != kindTable && h.kind != kindASCII || h.broken != nil || h.axes[1] == 0 {
			continue
		}
		if class, _ := f.dataClass(h); class == classOther || by == byClass && class != classSpectrum {
			continue
		}
		if h.missing > 0 {
			// A cut table is an error only where nothing else serves.
			if c, err := f.tableCandidate(h, by); err == nil && c != nil && firstErr == nil {
				firstErr = h.need(0, h.length)
			}
			continue
		}
		c, err := f.tableCandidate(h, by)
		if err != nil {
			return nil, err
		}
		if c != nil {
			cands = append(cands, *c)
		}
	}
	if len(cands) == 0 {
		return nil, firstErr
	}
	p := &plan{why: why}
	p.groups, p.skipped = arrange(cands)
	p.skipped = append(p.skipped, f.unclassed(by == byClass)...)
	return p, nil
}

// tableCandidate sees a spectrum in a table, nil for none.
func (f *File) tableCandidate(h *hdu, by telling) (*candidate, error) {
	roles := h.roles(by)
	pick := func(want role, fits func(*column) bool) *column {
		for _, r := range roles {
			if r.role == want && fits(r.col) {
				return r.col
			}
		}
		return nil
	}
	var a arm
	var flux *column
	for _, r := range roles {
		if r.role != roleWave || flux != nil {
			continue
		}
		w := r.col
		switch flux = pick(roleFlux, func(c *column) bool { return sameShape(c, w) }); {
		case flux != nil:
			if !w.isVector() && h.axes[1] < minTableRows && by == byNames {
				flux = nil
				continue
			}
			a.wave = columnWave(h, w)
		case !w.isVector():
			flux = pick(roleFlux, (*column).isVector)
			step := pick(roleStep, func(c *column) bool { return !c.isVector() })
			if flux == nil || step == nil {
				flux = nil
				continue
			}
			a.wave = columnWave(h, w)
			a.wave.values, a.wave.start = place{}, a.wave.values
			a.wave.step = place{hdu: h, col: step}
		}
	}
	if flux == nil {
		if flux = pick(roleFlux, (*column).isVector); flux == nil {
			return nil, nil
		}
		ok := false
		if a.wave, ok = f.waveElsewhere(h, flux); !ok {
			return nil, nil
		}
	}
	a.flux, a.fluxUnit = place{hdu: h, col: flux}, flux.unit
	like := func(c *column) bool { return sameShape(c, flux) }
	for _, want := range weightRoles {
		if c := pick(want, like); c != nil {
			a.weight, a.weightRole = place{hdu: h, col: c}, want
			break
		}
	}
	if low, high := pick(roleErrLow, like), pick(roleErrHigh, like); !a.weight.isSet() && low != nil && high != nil {
		a.weight, a.upper, a.weightRole = place{hdu: h, col: low}, place{hdu: h, col: high}, roleSigma
	}
	for _, want := range []role{roleQuality, roleGood, roleMask} {
		if want == roleMask && a.weightRole == roleIvar {
			continue // never applied beside inverse variances, see applyMask
		}
		isMask := func(c *column) bool { return like(c.asFlags(!flux.isVector())) }
		if c := pick(want, isMask); c != nil {
			a.masks = append(a.masks, f.maskFor(place{hdu: h, col: c.asFlags(!flux.isVector())}, want))
		}
	}
	for _, want := range []role{roleDisp, roleFWHM, rolePower} {
		if c := pick(want, like); c != nil {
			a.resolution, a.resRole = place{hdu: h, col: c}, want
			if _, ok := c.isLength(); ok && want == rolePower {
				a.resRole = roleFWHM
			}
			break
		}
	}
	if c := pick(rolePoints, func(c *column) bool { return !c.isVector() }); c != nil && flux.isVector() {
		a.points = place{hdu: h, col: c}
	}
	cand := &candidate{name: h.name, rows: 1, shape: h.shape()}
	cand.base, a.name = splitArm(h.name)
	cand.arm = a
	if flux.isVector() {
		cand.rows = h.axes[1]
		if c := pick(roleOrder, func(c *column) bool { return !c.isVector() }); c != nil && h.axes[1] > 1 {
			orders, err := f.ordersOfOne(h, c)
			if err != nil {
				return nil, err
			}
			if orders {
				cand.rows, cand.orders = 1, h.axes[1]
			}
		}
	}
	return cand, nil
}

// sameShape reports whether two columns hold the same number of values. Arrays
// on the heap tell only when they are read.
func sameShape(a, b *column) bool {
	if a.heap != 0 || b.heap != 0 {
		return a.isVector() && b.isVector()
	}
	return a.values() == b.values()
}

// shape names the columns of a table.
func (h *hdu) shape() string {
	var b strings.Builder
	for _, c := range h.columns {
		b.WriteString(c.name)
		b.WriteByte(' ')
	}
	return b.String()
}

// columnWave plans wavelengths out of a column and what its name, unit and UCD
// tell about them.
func columnWave(h *hdu, c *column) wavePlan {
	w := wavePlan{values: place{hdu: h, col: c}}
	w.describe(c.name, c.unit, c.ucd, c.comment)
	return w
}

// describe settles unit, scale, quantity and medium by what is written beside
// the values.
func (w *wavePlan) describe(name, unit, ucd, comment string) {
	if w.unit, w.unitKnown = parseUnit(unit); !w.unitKnown {
		w.unit, w.unitKnown = unitInName(name)
	}
	if !w.unitKnown {
		w.unit = unitAngstrom
		if q := quantityInName(name, ucd); q != wavelength {
			w.unit = spectralUnit{q, 1, linear}
		}
	}
	if s := scaleInName(name); w.unit.scale == linear && s != linear {
		w.unit.scale = s
		if !w.unitKnown {
			w.unitKnown = true // by common practice logarithms are of Angstrom
		}
	}
	if m, ok := mediumInWords(name, ucd, comment); ok {
		w.medium, w.mediumKnown, w.mediumWhy = m, true, fmt.Sprintf("stated with %s", name)
	}
	if w.unit.quantity != wavelength {
		w.medium, w.mediumKnown, w.mediumWhy = spectrum.Vacuum, true, "the axis is no wavelength"
	}
	w.atRest = restInName(name)
}

// waveElsewhere looks for the wavelengths of a flux column outside the columns: axis
// cards for the arrays in its cells, an image that is named so, or axis cards in
// the table's header.
func (f *File) waveElsewhere(h *hdu, flux *column) (wavePlan, bool) {
	if w, ok := cellAxis(h, flux); ok {
		return w, true
	}
	n := flux.repeat
	for _, other := range f.hdus {
		if other.kind == kindImage && other.pixels() == n && other.lines() == 1 && roleOfName(other.name).role == roleWave {
			w := wavePlan{values: place{hdu: other}}
			w.describe(other.name, other.header.text("BUNIT"), "", "")
			return w, true
		}
	}
	if a, ok, err := readAxis(h.header, 1); ok && err == nil && a.algorithm != "TAB" {
		return axisWave(&a, h), true
	}
	return wavePlan{}, false
}

func axisWave(a *axis, h *hdu) wavePlan {
	w := wavePlan{axis: a, axisHDU: h, unit: a.unit, unitKnown: a.unitKnown}
	w.medium, w.mediumKnown = a.medium()
	w.mediumWhy = "CTYPE"
	return w
}

// ordersOfOne reports whether the rows of a table are the orders of one target:
// the order numbers are all different and no column names targets or positions.
func (f *File) ordersOfOne(h *hdu, c *column) (bool, error) {
	if h.axes[1] > 1000 {
		return false, nil
	}
	if id, ra, _ := targetColumns(h); id != nil || ra != nil {
		return false, nil
	}
	v, err := f.scalarColumns(h, []*column{c})
	if err != nil {
		return false, err
	}
	seen := map[float64]bool{}
	for _, x := range v[0] {
		if x != x || seen[x] {
			return false, nil
		}
		seen[x] = true
	}
	return true, nil
}

// maskFor plans a mask, with the bits that headers declare to be bad and the
// sense that its comment gives.
func (f *File) maskFor(at place, r role) maskPlan {
	m := maskPlan{at: at, role: r}
	if at.col != nil {
		text := strings.ReplaceAll(strings.ToLower(at.col.comment), " ", "")
		if strings.Contains(text, "1=good") || strings.Contains(text, "0=bad") {
			m.role = roleGood
		}
	}
	if r == roleQuality {
		for _, h := range []*hdu{at.hdu, f.hdus[0]} {
			if bits, ok := h.header.integer("SDQFLAGS"); ok && bits > 0 {
				m.bits = bits
				break
			}
		}
	}
	return m
}

// findGuess takes the first two number columns of a table for wavelength and
// flux when the first one increases or decreases all the way, and a third
// positive one for the error.
func (f *File) findGuess() (*plan, error) {
	for _, h := range f.hdus {
		if h.kind != kindTable && h.kind != kindASCII || h.broken != nil || h.missing > 0 || h.axes[1] < minTableRows {
			continue
		}
		if class, _ := f.dataClass(h); class == classOther {
			continue
		}
		var cols []*column
		for i := range h.columns {
			if c := &h.columns[i]; c.numeric() && !c.isVector() && c.repeat == 1 && len(cols) < 3 {
				cols = append(cols, c)
			}
		}
		if len(cols) < 2 {
			continue
		}
		v, err := f.scalarColumns(h, cols)
		if err != nil {
			return nil, err
		}
		if !monotonic(v[0]) {
			continue
		}
		a := arm{flux: place{hdu: h, col: cols[1]}, fluxUnit: cols[1].unit, wave: columnWave(h, cols[0])}
		note := fmt.Sprintf("columns %s and %s of HDU %d taken for wavelength and flux by their place", cols[0].name, cols[1].name, h.index)
		if len(cols) == 3 && nonNegative(v[2]) {
			a.weight, a.weightRole = place{hdu: h, col: cols[2]}, roleWeight
		}
		return &plan{why: "the first column runs in order", groups: []group{{name: h.name, arms: []arm{a}, rows: 1}},
			guesses: []string{note}}, nil
	}
	return nil, nil
}

func monotonic(v []float64) bool {
	for i := 1; i < len(v); i++ {
		if !(v[i] > 0) || (v[i] > v[i-1]) != (v[1] > v[0]) || v[i] == v[i-1] {
			return false
		}
	}
	return len(v) > 1 && v[0] > 0
}

func nonNegative(v []float64) bool {
	n := 0
	for _, x := range v {
		if x < 0 {
			return false
		}
		if x > 0 {
			n++
		}
	}
	return n > 0
}
