package redshift

import (
	"math"

	"duskline/spectrum"
)

// Within returns a finder that keeps to the limits: families of the class alone,
// their redshift ranges cut to the limits. Families that end up with no range are
// left out; with none left Find says that no family covers the spectrum.
// The finder shares everything with f and may use the scratch of f.
func (f *Finder) Within(lim spectrum.Limits) *Finder {
	within := *f
	within.families = nil
	for _, fam := range f.families {
		if lim.Class != "" && fam.Class != lim.Class {
			continue
		}
		cut := *fam
		if !math.IsNaN(lim.ZMin) {
			cut.ZMin = math.Max(cut.ZMin, lim.ZMin)
		}
		if !math.IsNaN(lim.ZMax) {
			cut.ZMax = math.Min(cut.ZMax, lim.ZMax)
		}
		if cut.ZMin <= cut.ZMax {
			within.families = append(within.families, &cut)
		}
	}
	return &within
}
