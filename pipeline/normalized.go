package pipeline

import (
	"math"
	"slices"
	"strings"

	"duskline/spectrum"
)

const (
	stretches     = 40  // in which the light level is looked at
	levelTolerant = 0.1 // of it against 1
	levelShare    = 0.75
)

// normalized reports whether a spectrum that is not in units of energy looks
// divided by its continuum, whatever other unit was left in its header: in three
// quarters of its stretches the upper fifth of the pixels begins at 1 within a tenth,
// which lines and the forest below do not change.
func normalized(g *spectrum.Grid, unit string, scratch []float64) bool {
	for _, energy := range []string{"erg", "jy", "w/", "w "} {
		if strings.Contains(strings.ToLower(unit), energy) {
			return false
		}
	}
	n, first, last := g.Good()
	if n < 20*stretches {
		return false
	}
	level, seen := 0, 0
	for k := range stretches {
		lo, hi := first+k*(last+1-first)/stretches, first+(k+1)*(last+1-first)/stretches
		v := scratch[:0]
		for i := lo; i < hi; i++ {
			if g.Ivar[i] > 0 {
				v = append(v, g.Flux[i])
			}
		}
		if len(v) < 10 {
			continue
		}
		seen++
		slices.Sort(v)
		if math.Abs(v[4*len(v)/5]-1) < levelTolerant {
			level++
		}
		scratch = v
	}
	return seen > 0 && float64(level) >= levelShare*float64(seen)
}
