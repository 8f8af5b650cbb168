package absorbers

import (
	"cmp"
	"math"
	"slices"

	"duskline/spectrum"
)

const (
	// Significance that the stronger line, the weaker line, and both together
	// must have in the boxes of the search to be nominated.
	boxStrong, boxWeak, boxBoth = 2.5, 1.0, 4.0
	// In the fit the lines must have strongFrom and weakFrom, and both together
	// explain chi^2 of pairGain and twice the logarithm of the number of pixels, at
	// each of which there might be one: a square of 5 in 3,000 pixels.
	strongFrom, weakFrom, pairGain = 3.0, 2.0, 9.0
	// contFloor is the standard error of the continuum that no fit of a
	// straight line knows of, as a fraction; common practice, no source.
	contFloor = 0.01
	// Range of the boxes' half widths, km/s, and their growth.
	boxFirst, boxLast, boxGrowth = 20.0, 300.0, 1.5
	// An equivalent width is summed outward from the center while the two
	// lines together stand above edgeFrom of their error, over gaps of up to
	// bridgeKms beyond which they stand above bridgeFrom.
	edgeFrom   = 2.5
	bridgeKms  = 50
	bridgeFrom = 3.0
	// What lies outside contradicts the ratio by drawFrom of its error where
	// something else begins.
	drawFrom = 3.0
	// linkKms is the gap over which neighbors are one system: published systems at
	// redshift 6 have components up to 181 km/s apart, each of
	// which reaches some 40 km/s to either side.
	linkKms = 100.0
	// sumFrom is the significance that the sum over the stronger line must have.
	sumFrom = 3.0
	// foreignFrom is by how many errors a pixel must be deeper than the other
	// line allows to belong to something else.
	foreignFrom = 2.5
	// secondGain is the chi^2 that the weaker line must explain beside the
	// stronger alone; mostMisfit and mostMisfitPart bound, as chi^2 and as part
	// of what the pair explains, what speaks against any ratio it can have.
	secondGain                 = 4.0
	mostMisfit, mostMisfitPart = 9.0, 0.1
	// leastRange is the half range of a sum at least, in sigmas of the fitted
	// Gaussian.
	leastRange = 1.0
	// mostMismatch is the part of the absorption that may contradict a ratio.
	mostMismatch = 0.2
	// mostNominees is how many are fitted, the best in their boxes.
	mostNominees = 3000
	// proximateKms is how near to the object a system is called proximate.
	proximateKms = 3000.0
	// ownKms is how far in front of a background with lines of its own a system
	// lies at least.
	ownKms = 3000.0
	// behindKms is how far redward of the object a system may lie.
	behindKms = 3000.0
)

// metals is the state of the doublet search.
type metals struct {
	depth, weight []float64    // 1 - flux/continuum, and its inverse variance
	sum           [2][]float64 // running sums of weight and weight*depth
	box           []float64    // significance of the box around every pixel
	found         []candidate
	accepted      []measured
	taken         []bool // pixels that an accepted system explains
	memory        float64
}

type candidate struct {
	doublet int
	x       float64 // c ln wave of the stronger line
	score   float64
	fit     pairFit
}

// findDoublets looks for pairs of absorption lines redward of Lyman alpha.
func (s *Scratch) findDoublets(dst []System, f *Finder, opt Options, first int) []System {
	t, m := &s.track, &s.metal
	s.normalize()
	m.found = m.found[:0]
	end := opt.last()
	for half := boxFirst; half <= boxLast; half *= boxGrowth {
		if first+1 < len(t.x) && half*boxGrowth < t.dx[first] {
			continue // one pixel, as the next one
		}
		s.boxes(half)
		for i := first; i < len(t.x); i++ {
			if m.box[i] < boxStrong || i > 0 && m.box[i-1] > m.box[i] || i+1 < len(t.x) && m.box[i+1] > m.box[i] {
				continue
			}
			for d := range f.doublets {
				db := &f.doublets[d]
				if t.x[i]-spectrum.SpeedOfLight*math.Log(db.strong.Wave) > end || half > 0.5*db.split {
					continue
				}
				j := index(t.x, t.x[i]+db.split)
				if j < 1 || j+1 >= len(t.x) {
					continue
				}
				if weak := max(m.box[j-1], m.box[j], m.box[j+1]); weak > boxWeak {
					if score := math.Hypot(m.box[i], weak); score > boxBoth {
						m.found = append(m.found, candidate{doublet: d, x: t.x[i], score: score})
					}
				}
			}
		}
	}
	s.judge(f, len(t.x)-first)
	m.accepted = m.accepted[:0]
	for _, c := range m.found {
		if sys, ok := s.measureDoublet(f, c, opt); ok && !s.unlikely(f, &sys, first) {
			split := f.doublets[c.doublet].split
			s.take(sys.low, sys.high)
			s.take(sys.low+split, sys.high+split)
			m.accepted = append(m.accepted, sys)
		}
	}
	m.accepted = s.link(f, m.accepted, opt)
	slices.SortStableFunc(m.accepted, func(a, b measured) int {
		return cmp.Or(cmp.Compare(a.doublet, b.doublet), cmp.Compare(a.Z, b.Z))
	})
	for _, sys := range m.accepted {
		dst = append(dst, sys.System)
	}
	return dst
}

// judge fits every nominee and keeps those whose two lines stand out together
// and each by itself, in a ratio that they can have, the best first.
func (s *Scratch) judge(f *Finder, pixels int) {
	t, m := &s.track, &s.metal
	if len(m.found) > mostNominees {
		slices.SortStableFunc(m.found, func(a, b candidate) int { return cmp.Compare(b.score, a.score) })
		m.found = m.found[:mostNominees]
	}
	// Boxes of several widths nominate the same pixel.
	slices.SortStableFunc(m.found, func(a, b candidate) int {
		return cmp.Or(cmp.Compare(a.doublet, b.doublet), cmp.Compare(a.x, b.x), cmp.Compare(b.score, a.score))
	})
	kept := m.found[:0]
	need := pairGain + 2*math.Log(float64(pixels))
	last := candidate{doublet: -1}
	for _, c := range m.found {
		if c.doublet == last.doublet && c.x-last.x < 0.5*t.dx[min(index(t.x, c.x), len(t.x)-1)] {
			continue
		}
		last = c
		p, ok := s.fitPair(&f.doublets[c.doublet], c.x)
		if !ok || p.strong < strongFrom*p.strongErr || p.weak < weakFrom*p.wkErr || p.gain < need || p.gain-p.lone < secondGain ||
			p.misfit > mostMisfit+mostMisfitPart*p.gain {
			continue
		}
		c.fit, c.score, c.x = p, p.gain-p.misfit, p.x
		kept = append(kept, c)
	}
	m.found = kept
	// Al III is the rarest: it has what the others leave.
	late := func(c *candidate) int {
		if f.doublets[c.doublet].kind == AlIII {
			return 1
		}
		return 0
	}
	slices.SortStableFunc(m.found, func(a, b candidate) int {
		return cmp.Or(cmp.Compare(late(&a), late(&b)), cmp.Compare(b.score, a.score))
	})
}

// normalize fills depth, weight and their running sums.
func (s *Scratch) normalize() {
	t, m := &s.track, &s.metal
	n := len(t.x)
	m.depth, m.weight, m.box = resize(m.depth, n), resize(m.weight, n), resize(m.box, n)
	for k := range m.sum {
		m.sum[k] = resize(m.sum[k], n+1)
	}
	if cap(m.taken) < n {
		m.taken = make([]bool, n+n/2)
	}
	m.taken = m.taken[:n]
	clear(m.taken)
	for i := range n {
		c := s.red.level[i]
		if t.weight[i] > 0 && c > 0 && c > 3*s.red.err[i] {
			m.depth[i], m.weight[i] = 1-t.flux[i]/c, t.weight[i]*c*c
		}
		m.sum[0][i+1] = m.sum[0][i] + m.weight[i]
		m.sum[1][i+1] = m.sum[1][i] + m.weight[i]*m.depth[i]
	}
}

// boxes fills box with the mean depth within half of every pixel over its
// error: pixel noise, continuum and contFloor. 0 where pixels lack.
func (s *Scratch) boxes(half float64) {
	t, m := &s.track, &s.metal
	lo, hi := 0, 0
	for i := range t.x {
		for hi < len(t.x) && t.x[hi] <= t.x[i]+half {
			hi++
		}
		for t.x[lo] < t.x[i]-half {
			lo++
		}
		m.box[i] = 0
		w := m.sum[0][hi] - m.sum[0][lo]
		if w > 0 && m.weight[i] > 0 {
			rel := s.red.err[i] / s.red.level[i]
			m.box[i] = (m.sum[1][hi] - m.sum[1][lo]) / w / math.Sqrt(m.memory/w+rel*rel+contFloor*contFloor)
		}
	}
}
