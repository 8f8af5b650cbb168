package absorbers

import (
	"cmp"
	"slices"
)

// measured is a doublet with the range over which its lines were summed, c ln wave of
// the stronger.
type measured struct {
	System
	doublet   int
	low, high float64
}

// link makes one system of those of an ion whose ranges lie within linkKms of one
// another, summed over all from the first to the last, as long as the two lines do
// not run into each other.
func (s *Scratch) link(f *Finder, list []measured, opt Options) []measured {
	slices.SortStableFunc(list, func(a, b measured) int {
		return cmp.Or(cmp.Compare(a.doublet, b.doublet), cmp.Compare(a.low, b.low))
	})
	out := list[:0]
	for _, b := range list {
		if n := len(out) - 1; n >= 0 {
			a := &out[n]
			d := &f.doublets[a.doublet]
			if a.doublet == b.doublet && b.low-a.high < linkKms && b.high-a.low < d.split {
				for _, shift := range [2]float64{0, d.split} {
					s.free(a.low+shift, b.high+shift)
				}
				mid := 0.5 * (a.low + b.high)
				whole, ok := s.sumDoublet(f, a.doublet, mid, a.low-mid, b.high-mid, opt)
				for _, shift := range [2]float64{0, d.split} {
					s.take(a.low+shift, b.high+shift)
				}
				if ok {
					*a = whole
					continue
				}
			}
		}
		out = append(out, b)
	}
	return out
}

// take marks the pixels of an accepted line.
func (s *Scratch) take(low, high float64) { s.mark(low, high, true) }

// free takes the marks away.
func (s *Scratch) free(low, high float64) { s.mark(low, high, false) }

func (s *Scratch) mark(low, high float64, taken bool) {
	t := &s.track
	for i := index(t.x, low); i < len(t.x) && t.x[i] <= high; i++ {
		s.metal.taken[i] = taken
	}
}
