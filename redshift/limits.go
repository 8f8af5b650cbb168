package redshift

import (
	"math"

	"duskline/spectrum"
)

// Within returns a finder that keeps to the limits: families of the class alone,
// their redshift ranges cut to the limits. Families that end up with no range are
// left out; with none left nothing is found.
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

// Drop returns by how much an answer of f, or of a finder made from it by Within, lowers
// chi^2 with the weights that the last Find of s ended with, 0 where nothing was found: drops of
// two searches, each with weights of its own, are no more comparable than their units.
func (f *Finder) Drop(s *Scratch, r *Result) float64 {
	for _, fam := range f.families {
		if r.Found && fam.Name == r.Family {
			return s.bench.evaluate(&s.full, fam, r.Width, math.Log10(1+r.Redshift)).drop
		}
	}
	return 0
}
