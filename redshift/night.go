package redshift

import (
	"math"
	"slices"
)

// Hundreds of lines of OH make the night sky of the red. Where they were taken out well a line of the object on one of them
// is as good as any; where not, chance makes redshifts of what is left. Which it is the spectrum shows.
const (
	onNight  = 1.3 // pixels, half width of what an unresolved line spoils most; the Earth's motion is half of one
	offNight = 4.0 // pixels from the next line, where nothing of it is left
	// nightQuantile of the absolute residuals is compared: what is left of faint lines drowns, what is left of bright ones does not.
	nightQuantile = 0.8
	nightLeast    = 60  // pixels on lines that are needed
	nightShows    = 1.2 // excess from which it counts: the quantile of 60 Gaussian residuals is known to 11 %
)

// nightLeft sets s.night, by what factor the residuals s.tmp of the winning model, over their errors, are larger on lines of
// the night sky than between them; 1 where no more than by chance.
func (f *Finder) nightLeft(s *Scratch) {
	l := &s.full
	s.night = 1
	if len(f.opt.Night) == 0 {
		return
	}
	s.shares, s.aside = s.shares[:0], s.aside[:0] // on lines, off them
	first, last := math.Log10(f.opt.Night[0]), math.Log10(f.opt.Night[len(f.opt.Night)-1])
	lo, hi := l.pixel(first), l.pixel(last)
	next := 0
	at := func(k int) float64 { return (math.Log10(f.opt.Night[k]) - l.start) / l.step }
	for i := lo; i <= hi; i++ {
		for next < len(f.opt.Night)-1 && at(next+1)-float64(i) <= float64(i)-at(next) {
			next++
		}
		if l.weight[i] <= 0 {
			continue
		}
		switch d := math.Abs(at(next) - float64(i)); {
		case d <= onNight:
			s.shares = append(s.shares, math.Sqrt(l.weight[i])*math.Abs(s.tmp[i]))
		case d >= offNight:
			s.aside = append(s.aside, math.Sqrt(l.weight[i])*math.Abs(s.tmp[i]))
		}
	}
	if len(s.shares) < nightLeast || len(s.aside) < nightLeast {
		return
	}
	slices.Sort(s.shares)
	slices.Sort(s.aside)
	on, off := s.shares[int(nightQuantile*float64(len(s.shares)))], s.aside[int(nightQuantile*float64(len(s.aside)))]
	if on > nightShows*off {
		s.night = on / math.Max(off, math.SmallestNonzeroFloat64)
	}
}

// near reports whether one of the sorted values lies in [from, to].
func near(sorted []float64, from, to float64) bool {
	k, _ := slices.BinarySearch(sorted, from)
	return k < len(sorted) && sorted[k] <= to
}
