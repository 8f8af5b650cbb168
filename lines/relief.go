package lines

import (
	"math"
	"slices"

	"duskline/spectrum"
)

const (
	// reliefReach is how far around a line its surroundings count, in sigmas of the
	// line, and at least, km/s. Common practice, no source: some ten features of its
	// width, and for a narrow line a whole blend.
	reliefReach = 20.0
	reliefLeast = 4000.0
	// reliefFrom is how many boxes in dips it takes to tell.
	reliefFrom = 6
	// reliefBoxes bounds how many boxes are tried around a narrow line.
	reliefBoxes = 40
	// reliefOwn is the part around a line, in sigmas, that is its own.
	reliefOwn = 2.5
	// boxShare is the mean of a Gaussian over +-1 sigma in units of its peak,
	// sqrt(pi/2) erf(1/sqrt 2).
	boxShare = 0.8556
	// flankFrom and flankTo bound the flanks of a box, in sigmas.
	flankFrom, flankTo = 1.75, 3.5
)

// height is a mean flux with its variance.
type height struct{ mean, variance float64 }

// frame is the pixels of a box and of its flanks: between [0] and [5] without
// those between [1] and [4], the box itself between [2] and [3].
type frame [6]int

var frameEdges = [6]float64{-flankTo, -flankFrom, -1, 1, flankFrom, flankTo}

// slide moves a frame, whose edges only ever move redward, to a wavelength.
func (f *frame) slide(a *Arm, wave, sigma float64) {
	d := wave * sigma / spectrum.SpeedOfLight
	for k, e := range frameEdges {
		for f[k] < len(a.Wave) && a.Wave[f[k]] < wave+e*d {
			f[k]++
		}
	}
	f[3] = max(f[3], f[2]+1)
}

// place returns the frame at a wavelength.
func place(a *Arm, wave, sigma float64) (f frame) {
	first := a.index(wave * (1 - flankTo*sigma/spectrum.SpeedOfLight))
	for k := range f {
		f[k] = first
	}
	f.slide(a, wave, sigma)
	return f
}

// above returns the height of a frame over its flanks; its variance is 0 where too few
// pixels are good.
func (s *Scratch) above(arm int, f *frame) height {
	box := s.within(arm, f)
	lw, lwr, ln := s.box(arm, f[0], f[1])
	rw, rwr, rn := s.box(arm, f[4], f[5])
	if w := lw + rw; box.variance > 0 && ln > 0 && rn > 0 && w > 0 {
		return height{box.mean - (lwr+rwr)/w, box.variance + 1/w}
	}
	return height{}
}

// within returns the mean residual in the box of a frame, likewise.
func (s *Scratch) within(arm int, f *frame) height {
	w, wr, n := s.box(arm, f[2], f[3])
	if n < 0.6*float64(f[3]-f[2]) || !(w > 0) {
		return height{}
	}
	return height{wr / w, 1 / w}
}

// relief returns how deep, in units of flux, the dips around an observed
// wavelength are that have the width of a Gaussian of sigma, km/s: the larger of two root mean
// squares, of what boxes of that width lie below their flanks, and below the median of all
// boxes, less what noise does. The first sees through a continuum that is wrong
// all along, the second sees dips wider than the line.
func (s *Scratch) relief(arm int, mu, sigma float64) float64 {
	a := &s.arms[arm]
	reach, own := max(reliefReach*sigma, reliefLeast)/spectrum.SpeedOfLight, reliefOwn*sigma/spectrum.SpeedOfLight
	i, end := a.index(mu*(1-reach)), a.index(mu*(1+reach))
	if i == len(a.Wave) {
		return 0
	}
	s.heights = s.heights[:0]
	var flanked dips
	least := (end - i) / reliefBoxes
	for f := place(a, a.Wave[i], sigma); i < end; i += max(1, least, (f[3]-f[2])/2) {
		f.slide(a, a.Wave[i], sigma)
		if math.Abs(a.Wave[i]/mu-1) < own {
			continue
		}
		if h := s.above(arm, &f); h.variance > 0 {
			flanked.add(h)
		}
		if h := s.within(arm, &f); h.variance > 0 {
			s.heights = append(s.heights, h)
		}
	}
	if len(s.heights) == 0 {
		return 0
	}
	s.means = s.means[:0]
	for _, h := range s.heights {
		s.means = append(s.means, h.mean)
	}
	slices.Sort(s.means)
	middle := s.means[len(s.means)/2]
	var whole dips
	for _, h := range s.heights {
		whole.add(height{h.mean - middle, h.variance})
	}
	return max(flanked.depth(), whole.depth())
}

// dips gathers heights below zero.
type dips struct{ sum, noise, n float64 }

func (d *dips) add(h height) {
	if h.mean < 0 {
		d.sum += h.mean * h.mean
		d.noise += h.variance
		d.n++
	}
}

// depth returns the root mean square depth beyond the noise, which is granted two
// standard deviations of the mean of n squares.
func (d *dips) depth() float64 {
	if d.n < reliefFrom {
		return 0
	}
	return math.Sqrt(max(0, d.sum-d.noise*(1+2*math.Sqrt(2/d.n))) / d.n)
}
