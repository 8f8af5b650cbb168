package redshift

import "math"

// designSigma is the Gaussian width in km/s of the instruments that the widths of
// the families are made for, R = 2000: it is in them already.
const designSigma = 64.0

// Resolved returns a finder for an instrument of Gaussian width sigma in km/s. What
// a family's width has beyond designSigma is the object's own, and the instrument
// adds to it in quadrature,
//
//	width^2 = w^2 - designSigma^2 + sigma^2,
//
// wider for less resolution and narrower for more, but no narrower than half a
// pixel of the grid where w is not. Instruments within a tenth of the design, and
// NaN, change nothing. Widths that recipes fix in km/s stay.
func (f *Finder) Resolved(sigma float64) *Finder {
	if !(math.Abs(sigma/designSigma-1) > 0.1) {
		return f
	}
	fitted := *f
	fitted.families = make([]*Family, len(f.families))
	for i, fam := range f.families {
		own := *fam
		own.Widths = make([]float64, len(fam.Widths))
		for k, w := range fam.Widths {
			least := min(w, 0.5*f.step*ln10*speedOfLight)
			own.Widths[k] = math.Sqrt(max(w*w-designSigma*designSigma+sigma*sigma, least*least))
		}
		fitted.families[i] = &own
	}
	return &fitted
}
