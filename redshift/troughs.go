package redshift

import (
	"math"
	"slices"
)

// Black troughs: stretches without light, wider than any line that a family
// has, between stretches with light. Damped Lyman-alpha absorbers and broad absorption make
// them, and telluric bands; no family does, and left in they decide
// the redshift, because whatever rises beside them gains more than all lines of a quasar.
const (
	troughBin   = 300.0   // km/s
	troughLeast = 1300.0  // km/s of darkness
	troughMost  = 15000.0 // km/s; more is the forest of a distant source, or no data
	troughDark  = 0.12    // of the light on the darker side
	troughRim   = 0.8     // of it, up to where the wings are left out
	shoulder    = 6000.0  // km/s on either side from which the light is taken
)

// maskTroughs takes the weight of black troughs in l, whose resid still holds
// the flux, out to where the flux recovers, at most one and a half times the
// dark width to either side.
func (s *Scratch) maskTroughs(l *level) {
	per := max(1, int(math.Round(troughBin/s.pixelKms())))
	n := l.n / per
	wide := int(shoulder / troughBin)
	s.binFlux, s.binErr = grow(s.binFlux, n), grow(s.binErr, n)
	for k := range n {
		var w, wf float64
		for i := k * per; i < (k+1)*per; i++ {
			w += l.weight[i]
			wf += l.weight[i] * l.resid[i]
		}
		s.binFlux[k], s.binErr[k] = 0, math.Inf(1)
		if w > 0 {
			s.binFlux[k], s.binErr[k] = wf/w, 1/math.Sqrt(w)
		}
	}
	brightest := 0.0
	for _, v := range s.binFlux {
		brightest = math.Max(brightest, v)
	}
	// light is the upper quartile of the bins lo to hi; NaN with too few, or where most
	// of them are dark beside it: emission lines on hardly any continuum.
	light := func(lo, hi int) float64 {
		s.tmp = s.tmp[:0]
		for k := max(0, lo); k < min(n, hi); k++ {
			if !math.IsInf(s.binErr[k], 1) {
				s.tmp = append(s.tmp, s.binFlux[k])
			}
		}
		if len(s.tmp) < wide/2 {
			return math.NaN()
		}
		slices.Sort(s.tmp)
		upper := s.tmp[3*len(s.tmp)/4]
		if !(s.tmp[len(s.tmp)/2] > troughDark*upper) {
			return math.NaN()
		}
		return upper
	}
	for k := 0; k < n; k++ {
		if !(s.binFlux[k] < troughDark*brightest) || !(s.binErr[k] < 0.5*troughDark*brightest) {
			continue // most of a spectrum
		}
		blue := light(k-wide, k)
		if !(s.binFlux[k] < troughDark*blue) || !(s.binErr[k] < 0.5*troughDark*blue) {
			continue
		}
		end := k
		for end < n && s.binFlux[end] < troughDark*blue && !math.IsInf(s.binErr[end], 1) {
			end++
		}
		side := math.Min(blue, light(end, end+wide))
		width := end - k
		dark := float64(width) * troughBin
		if dark < troughLeast || dark > troughMost || !(side > 0.5*blue) {
			k = end
			continue
		}
		lo, hi := k, end
		for lo > max(0, k-(3*width+1)/2) && s.binFlux[lo-1] < troughRim*side {
			lo--
		}
		for hi < min(n, end+(3*width+1)/2) && s.binFlux[hi] < troughRim*side {
			hi++
		}
		clear(l.weight[lo*per : hi*per])
		k = end
	}
}
