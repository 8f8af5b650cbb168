package lines

import (
	"math"
	"strings"

	"duskline/spectrum"
)

const (
	// Lines nearer than this many times the sum of their sigmas are fitted
	// together.
	joinWithin = 2.5
	// Lines nearer than this many times the sum of their sigmas are reported
	// as overlapping.
	overlapWithin = SumHalfWidth
	// Lines of two ions nearer than this many sigma are measured as one.
	mergeIons = 0.7
	// Lines of one ion nearer than this many sigma share one amplitude, with
	// their ratio assumed.
	mergeSame = 1.2
	// ratioDoubt is the standard error of an assumed ratio. Thin and
	// saturated doublets, 2 and 1, lie one of it from the root of 2; the density
	// limits of [O II], 0.35 and 1.5, lie 2.8 and 1.1 of it from the 1 assumed.
	ratioDoubt = 0.35
	// maxJoin bounds how many lines neighborhood alone may bring into a blend.
	maxJoin = 14
)

// blend is a set of lines fitted together: member[first:first+count].
type blend struct {
	first, count int
	snr          float64 // of the best box
	faint        bool    // nothing seen: offset and width come from the rest of the spectrum
}

// apart returns the distance of two lines at their starting places, km/s.
func (s *Scratch) apart(a, b *track) float64 {
	return math.Abs(spectrum.SpeedOfLight * (b.lam0/a.lam0 - 1))
}

// plan settles lines that cannot be told apart and gathers the blends.
func (s *Scratch) plan() {
	s.blends, s.member = s.blends[:0], s.member[:0]
	s.lent = lent{}
	s.parent = s.parent[:0]
	for i := range s.tracks {
		s.parent = append(s.parent, i)
	}
	for i := range s.tracks {
		for j := i + 1; j < len(s.tracks) && s.tracks[i].usable; j++ {
			a, b := &s.tracks[i], &s.tracks[j]
			if b.usable && a.line.ion != b.line.ion && a.broad == b.broad {
				s.settle(a, b)
			}
		}
	}
	for i := range s.tracks {
		for j := i + 1; j < len(s.tracks) && s.tracks[i].usable; j++ {
			if s.tracks[j].usable {
				s.join(i, j)
			}
		}
	}
	for i := range s.tracks {
		if !s.tracks[i].usable || s.root(i) != i {
			continue
		}
		b := blend{first: len(s.member), faint: true}
		for j := i; j < len(s.tracks); j++ {
			if s.tracks[j].usable && s.root(j) == i {
				s.member = append(s.member, j)
				b.faint = b.faint && !s.tracks[j].seen()
				b.snr = max(b.snr, math.Abs(s.tracks[j].snr))
			}
		}
		b.count = len(s.member) - b.first
		s.blends = append(s.blends, b)
	}
	// Strongest first, so that they can lend offset and width to the others.
	s.order = s.order[:0]
	for i := range s.blends {
		s.order = append(s.order, i)
		for k := i; k > 0 && s.blends[s.order[k]].snr > s.blends[s.order[k-1]].snr; k-- {
			s.order[k], s.order[k-1] = s.order[k-1], s.order[k]
		}
	}
}

// root finds the representative of a set, always its lowest index.
func (s *Scratch) root(i int) int {
	for s.parent[i] != i {
		i = s.parent[i]
	}
	return i
}

// settle measures two lines of different ions as one when they lie too close
// to be told apart. One carries the sum: never one that the list does not
// expect with the sign seen; else the clearly stronger one at its own place;
// else the one whose ion shows itself better elsewhere in the spectrum.
func (s *Scratch) settle(a, b *track) {
	width := s.opt.guess(a.broad)
	switch {
	case a.seen() && b.seen():
		width = min(a.s, b.s)
	case a.seen():
		width = a.s
	case b.seen():
		width = b.s
	default:
		width = math.Hypot(width, a.sres)
	}
	if s.apart(a, b) > mergeIons*width {
		return
	}
	sg := a.first
	if math.Abs(b.first) > math.Abs(sg) {
		sg = b.first
	}
	carrier, silent := a, b
	sa, sb := s.support(a, sg, 0), s.support(b, sg, 0)
	ratio := math.Abs(b.first) / max(math.Abs(a.first), 1)
	switch {
	case s.opt.Stark && a.line.ion == hydrogenIon:
	case s.opt.Stark && b.line.ion == hydrogenIon:
		carrier, silent = b, a
	case min(sa, sb) < 0, ratio > 0.8 && ratio < 1.25, !a.seen() && !b.seen():
		if sb > sa {
			carrier, silent = b, a
		}
	case ratio > 1:
		carrier, silent = b, a
	}
	silent.usable = false
	silent.result.Reason = ReasonBlended
	silent.carrier = carrier.index
	var key labelKey
	key.add(min(a.index, b.index))
	key.add(max(a.index, b.index))
	silent.result.Blend = s.label(key)
	if math.Abs(silent.snr) > math.Abs(carrier.snr) {
		carrier.snr, carrier.v, carrier.s = silent.snr, silent.v, silent.s
	}
}

// support says how well a line would account for a feature of the signed S/N
// sg: the best S/N of that sign among other lines of its ion, those of a lot left out where
// lot is not 0, at least 0, and less than nothing when the list says that the line is not
// seen like that.
func (s *Scratch) support(t *track, sg float64, lot int) float64 {
	if (sg > 0 && t.line.Seen == Absorption) || (sg < 0 && t.line.Seen == Emission) {
		return -1
	}
	best := 0.0
	for k := range s.tracks {
		o := &s.tracks[k]
		if o.line != t.line && o.line.ion == t.line.ion && o.seen() && sign(o.snr) == sign(sg) && (lot == 0 || !s.trackInLot(k, lot)) {
			best = max(best, math.Abs(o.snr))
		}
	}
	return best
}

// join puts two lines into one blend if they belong together.
func (s *Scratch) join(i, j int) {
	a, b := &s.tracks[i], &s.tracks[j]
	grouped := a.line.group >= 0 && a.line.group == b.line.group
	if !grouped && s.apart(a, b) > joinWithin*(a.s+b.s) {
		return
	}
	ri, rj := s.root(i), s.root(j)
	if ri == rj || !grouped && s.size(ri)+s.size(rj) > maxJoin {
		return
	}
	s.parent[max(ri, rj)] = min(ri, rj)
}

func (s *Scratch) size(root int) int {
	n := 0
	for k := range s.parent {
		if s.tracks[k].usable && s.root(k) == root {
			n++
		}
	}
	return n
}

// labelKey identifies a blend's name: bit k of mask is line first+k of the
// list, bit k of wings its broader component.
type labelKey struct {
	first int
	mask  uint64
	wings uint64 // the same for broader components
}

// label returns the names of the lines in key, joined by "+". Names are kept,
// so that each is built once; lines more than 63 places on are left out.
func (s *Scratch) label(key labelKey) string {
	if name, ok := s.labels[key]; ok {
		return name
	}
	var names []string
	for k := range 64 {
		if key.mask&(1<<k) != 0 {
			names = append(names, s.meter.lines[key.first+k].Name)
		}
		if key.wings&(1<<k) != 0 {
			names = append(names, s.meter.lines[key.first+k].wings)
		}
	}
	s.labels[key] = strings.Join(names, "+")
	return s.labels[key]
}

// add puts a line into the key; lines come in list order.
func (k *labelKey) add(index int) {
	if k.mask == 0 {
		k.first = index
	}
	if d := index - k.first; d < 64 {
		k.mask |= 1 << d
	}
}

// addWings puts the broader component of a line that was added into the key.
func (k *labelKey) addWings(index int) {
	if d := index - k.first; d < 64 {
		k.wings |= 1 << d
	}
}
