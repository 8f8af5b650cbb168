package redshift

import (
	"math"
	"sync"

	"duskline/hydrogen"
)

// forestTable tabulates the mean Lyman-series transmission of the
// intergalactic medium less one (Inoue et al. 2014) over source redshift and
// rest wavelength. In the rest frame the edges of the series stay in place, so
// that interpolation between redshifts is smooth.
type forestTable struct {
	values [][]float64 // [redshift][rest pixel]
}

const (
	forestStart   = 2.7782 // log10 of 600 Angstrom
	forestStep    = 4e-4   // dex
	forestDz      = 0.1
	forestZMax    = 8.0
	forestEdge    = 1215.67
	forestEdgeLog = 3.0848157 // its log10
	// forestAnchor is log10 of the rest wavelength, 1310 Angstrom, where the
	// continuum is taken that the forest absorbs: between Lyman-alpha with N V
	// and the blend of Si IV.
	forestAnchor = 3.1173
)

// forest builds the table at its first use.
var forest = sync.OnceValue(func() *forestTable {
	n := int((math.Log10(forestEdge)-forestStart)/forestStep) + 1
	t := &forestTable{}
	for k := 0; float64(k)*forestDz <= forestZMax; k++ {
		z := float64(k) * forestDz
		row := make([]float64, n)
		for i := range row {
			row[i] = hydrogen.Transmission(z, math.Pow(10, forestStart+float64(i)*forestStep)*(1+z)) - 1
		}
		t.values = append(t.values, row)
	}
	return t
})

// draw adds transmission less one for a source at redshift z on n pixels whose
// rest-frame log10 wavelengths start at start. Below the table its first value
// holds. The scratch row is grown as needed.
func (t *forestTable) draw(d *drawing, row *[]float64, n int, start, step, z float64) {
	last := int(math.Ceil((math.Log10(forestEdge) - start) / step))
	if last <= 0 || z <= 0 {
		return
	}
	last = min(last, n)
	k := min(int(z/forestDz), len(t.values)-2)
	f := min(1, z/forestDz-float64(k))
	a, b := t.values[k], t.values[k+1]
	// Rest pixels that are needed, at this redshift.
	p0, ratio := (start-forestStart)/forestStep, step/forestStep
	top := len(a) - 2
	lo := max(0, min(top, int(p0)))
	mixed := grow(*row, len(a))
	*row = mixed
	for j := lo; j < len(a); j++ {
		mixed[j] = (1-f)*a[j] + f*b[j]
	}
	for i := 0; i < last; i++ {
		p := max(0, min(float64(top+1), p0+float64(i)*ratio))
		j := min(int(p), top)
		u := p - float64(j)
		d.values[i] += (1-u)*mixed[j] + u*mixed[j+1]
	}
	d.include(0, last)
}
