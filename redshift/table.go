package redshift

import "math"

// table holds the edges and bands of a component on a rest-frame log grid, so
// that drawing them needs no exponential.
type table struct {
	values   []float64
	from, to int // the part that is not zero
}

const (
	tableStart = 2.9 // log10 of 794 Angstrom
	tableEnd   = 4.6
	tableStep  = 1e-4 // dex; the sharpest shapes are some pixels wide
	headBlur   = 3.0  // Angstrom, softness of a band head on its steep side, about R = 2000
	headHalf   = 2.5  // Angstrom from half depth, where the head is, to full depth: headBlur sqrt(ln 2)
)

// newTable draws the edges and heads of a component, nil if it has none.
func newTable(edges []edge, heads []head) *table {
	if len(edges)+len(heads) == 0 {
		return nil
	}
	n := int((tableEnd - tableStart) / tableStep)
	t := &table{values: make([]float64, n), from: n}
	for i := range t.values {
		wave := math.Pow(10, tableStart+float64(i)*tableStep)
		v := 0.0
		for _, e := range edges {
			v -= e.at(wave)
		}
		for _, h := range heads {
			v -= h.at(wave)
		}
		t.values[i] = v
		if v != 0 {
			t.from, t.to = min(t.from, i), i+1
		}
	}
	return t
}

// at is the depth of a logistic step at a rest wavelength: height blueward,
// nothing redward or blueward of the step's start.
func (e *edge) at(wave float64) float64 {
	q := (wave - e.Wave) / e.Width
	if wave < e.From || q > 12 {
		return 0
	}
	return e.Height / (1 + math.Exp(q))
}

// at is the depth of a molecular band at a rest wavelength: a head with a
// Gaussian rise on its steep side, half way up at Wave, and an exponential tail.
func (h *head) at(wave float64) float64 {
	q := wave - h.Wave
	if h.Blue {
		q = -q
	}
	q -= headHalf
	switch {
	case q >= 0 && q < 6*h.Tail:
		return h.Depth * math.Exp(-q/h.Tail)
	case q < 0 && q > -3*headBlur:
		return h.Depth * math.Exp(-q*q/(headBlur*headBlur))
	}
	return 0
}

// draw adds the table to n pixels whose rest-frame log10 wavelengths start at
// start, by linear interpolation.
func (t *table) draw(d *drawing, n int, start, step float64) {
	ratio := step / tableStep
	p0 := (start - tableStart) / tableStep
	lo := max(0, int(math.Ceil((float64(t.from)-p0)/ratio)))
	hi := min(n, int(math.Floor((float64(t.to-2)-p0)/ratio))+1)
	if p0+float64(lo)*ratio < 0 {
		lo = int(math.Ceil(-p0 / ratio))
	}
	if lo >= hi {
		return
	}
	for i := lo; i < hi; i++ {
		p := p0 + float64(i)*ratio
		j := int(p)
		u := p - float64(j)
		d.values[i] += (1-u)*t.values[j] + u*t.values[j+1]
	}
	d.include(lo, hi)
}
