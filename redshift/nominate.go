package redshift

import (
	"cmp"
	"math"
	"slices"
)

// pixelKms is the width of a pixel of the full level in km/s.
func (s *Scratch) pixelKms() float64 { return speedOfLight * ln10 * s.full.step }

// nominate appends the trial redshifts of one family and width with their
// joint fits.
func (f *Finder) nominate(s *Scratch, index int, width float64) {
	fam := f.families[index]
	l := f.trials(s, fam, width)
	first := len(s.peaks)
	for _, shift := range s.shifts {
		p := peak{family: fam, index: index, width: width, shift: shift}
		p.fit = s.bench.evaluate(l, fam, width, shift)
		s.score(&p)
		if p.fit.active > 0 && fam.whole(&p.fit) {
			s.peaks = append(s.peaks, p)
		}
	}
	if l != &s.coarse || fam.headed() {
		return
	}
	// The scan knows no forest and no overlap of components: broad lines can be
	// a width off.
	found := s.peaks[first:]
	slices.SortStableFunc(found, byScore)
	for i := range found[:min(climbed, len(found))] {
		p := &found[i]
		s.bench.climb(l, p, 0.5*width/(speedOfLight*ln10), 6)
		s.bench.climb(l, p, 0.15*width/(speedOfLight*ln10), 2)
		s.score(p)
	}
}

// climbed is the number of trial redshifts of a family with broad lines that
// are climbed on binned pixels.
const climbed = 5

// byScore orders peaks, best first.
func byScore(a, b peak) int { return cmp.Compare(a.score, b.score) }

// trials writes the trial redshifts of a family and width into s.shifts and
// returns the level on which they are to be fitted: binned pixels where the lines
// of the family are wide.
func (f *Finder) trials(s *Scratch, fam *Family, width float64) *level {
	s.shifts = s.shifts[:0]
	if fam.headed() {
		// Bands have no place in the scan; such families have short ranges, and
		// the whole of it is tried.
		first, last := math.Log10(1+fam.ZMin), math.Log10(1+fam.ZMax)
		d := 4 * s.full.step
		for k := 0; first+float64(k)*d <= last; k++ {
			s.shifts = append(s.shifts, first+float64(k)*d)
		}
		return &s.coarse
	}
	apart := math.Max(6, 3*fam.narrowest(width)/s.pixelKms())
	if width >= 1.5*coarseFactor*s.pixelKms() {
		s.shifts = s.scanCoarse.nominate(s.shifts, &s.coarse, fam, width, &f.binned, f.opt.Nominees, int(apart/coarseFactor))
		s.withBreaks(fam, width)
		return &s.coarse
	}
	s.shifts = s.scan.nominate(s.shifts, &s.full, fam, width, &f.survive, f.opt.Nominees, int(apart))
	s.withBreaks(fam, width)
	return &s.full
}

const (
	// sweepFrom is the redshift from which the mean forest takes half of the
	// light just blueward of Lyman-alpha, so that the break says more than lines.
	sweepFrom  = 3.5
	sweepKept  = 3
	sweepStep  = 4      // rough pixels, 4,400 km/s
	sweepApart = 1      // steps
	sweepWidth = 2600.0 // km/s, of Lyman-alpha
)

// sweep finds the shifts at which the forest and Lyman-alpha alone
// describe the data best. The scan, made of lines, does not know the break that
// the forest makes at high redshift.
func (f *Finder) sweep(s *Scratch) {
	s.breaks = s.breaks[:0]
	if f.series == nil {
		return
	}
	l := &s.rough
	step := sweepStep * l.step
	first := math.Max(math.Log10(1+math.Max(f.series.ZMin, sweepFrom)), l.start-forestEdgeLog)
	last := math.Min(math.Log10(1+f.series.ZMax), l.start+float64(l.n-1)*l.step-forestEdgeLog)
	drop := func(x float64) float64 { return s.bench.evaluate(l, f.series, sweepWidth, x).drop }
	s.drops = s.drops[:0]
	for x := first; x <= last; x += step {
		s.drops = append(s.drops, drop(x))
	}
	for range sweepKept {
		best := 0
		for i, v := range s.drops {
			if v > s.drops[best] {
				best = i
			}
		}
		if len(s.drops) == 0 || s.drops[best] <= 0 {
			return
		}
		x := first + float64(best)*step
		// The better neighbor half-way to the next, if any is.
		top := s.drops[best]
		for _, near := range [2]float64{x - 0.5*step, x + 0.5*step} {
			if v := drop(near); v > top && near >= first && near <= last {
				x, top = near, v
			}
		}
		s.breaks = append(s.breaks, x)
		clear(s.drops[max(0, best-sweepApart):min(len(s.drops), best+sweepApart+1)])
	}
}

// withBreaks appends the shifts found by sweep that lie in the range of a
// forested family, to those of its broadest lines.
func (s *Scratch) withBreaks(fam *Family, width float64) {
	if !fam.forested || width != slices.Max(fam.Widths) {
		return
	}
	for _, x := range s.breaks {
		if x >= math.Log10(1+fam.ZMin) && x <= math.Log10(1+fam.ZMax) {
			s.shifts = append(s.shifts, x)
		}
	}
}
