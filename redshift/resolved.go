package redshift

import "math"

// designSigma is the Gaussian width in km/s of the instruments that the widths of
// the families are made for, R = 2000: it is in them already.
const designSigma = 64.0

// Resolved returns a finder for an instrument of Gaussian width sigma in km/s: the
// families' widths with what it has more than designSigma added in quadrature.
// Instruments that resolve as well or better, and NaN, change nothing: the lines of
// the objects are not narrower for it. Widths that recipes fix in km/s stay.
func (f *Finder) Resolved(sigma float64) *Finder {
	if !(sigma > 1.1*designSigma) {
		return f
	}
	excess := math.Sqrt(sigma*sigma - designSigma*designSigma)
	wide := *f
	wide.families = make([]*Family, len(f.families))
	for i, fam := range f.families {
		broad := *fam
		broad.Widths = make([]float64, len(fam.Widths))
		for k, w := range fam.Widths {
			broad.Widths[k] = math.Hypot(w, excess)
		}
		wide.families[i] = &broad
	}
	return &wide
}
