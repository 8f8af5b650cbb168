package lines

import (
	"math"

	"duskline/spectrum"
)

// findTracks lists the lines inside the coverage, looks for each, and drops
// those that lack pixels or continuum.
func (s *Scratch) findTracks() {
	s.tracks = s.tracks[:0]
	for i := range s.meter.lines {
		l := &s.meter.lines[i]
		t := track{line: l, index: i, carrier: -1, lam0: l.Wave * (1 + s.opt.Z), arm: -1}
		best := -1.0
		for k := range s.arms {
			a := &s.arms[k]
			n := len(a.Wave)
			if n < 2 || t.lam0 < a.Wave[0] || t.lam0 > a.Wave[n-1] {
				continue
			}
			c, dv := a.nearest(t.lam0), 300.0
			h := int(dv/a.pixelKms(c)) + 1
			if w, _, _ := s.box(k, c-h, c+h+1); w > best {
				best, t.arm = w, k
			}
		}
		if t.arm < 0 {
			continue
		}
		a := &s.arms[t.arm]
		c := a.nearest(t.lam0)
		t.pix, t.sres = a.pixelKms(c), a.sigmaKms(c)
		t.broad = s.opt.Broad && !l.narrow
		t.result = blank(l)
		t.s = max(math.Hypot(s.opt.guess(t.broad), t.sres), 0.5*t.pix)
		t.center, t.next = c, s.nextInGroup(i, t.broad)
		switch {
		case s.opt.Expect != nil && !s.opt.Expect(&l.Line):
			t.result.Reason = ReasonUnexpected
		case s.bar[i] == notThere:
			t.result.Reason = ReasonWrongSign
		default:
			s.search(&t)
			t.first = t.snr
		}
		s.tracks = append(s.tracks, t)
	}
	s.refine()
	for i := range s.tracks {
		t := &s.tracks[i]
		t.usable = t.result.Reason == "" && s.covered(t)
	}
}

const (
	strongFrom  = 8.0  // box S/N from which a line claims its pixels
	strongShare = 0.25 // the first to claim have this share of the best S/N
)

// refine looks again for the lines near stronger ones, without the pixels of
// those: else the wing of one line would be the dip beside it for another. It
// does so twice, first for the strongest lines of the spectrum.
func (s *Scratch) refine() {
	best := 0.0
	for i := range s.tracks {
		best = max(best, math.Abs(s.tracks[i].snr))
	}
	for _, from := range [2]float64{max(strongFrom, strongShare*best), strongFrom} {
		fresh := false
		for i := range s.tracks {
			if t := &s.tracks[i]; !t.strong && math.Abs(t.snr) >= from && s.dominant(i) {
				t.strong, fresh = true, true
			}
		}
		if !fresh {
			continue
		}
		s.claimPixels()
		s.survey()
		for i := range s.tracks {
			if t := &s.tracks[i]; !t.strong && s.nearClaim(t) {
				s.search(t)
			}
		}
	}
}

// dominant reports whether no line with a better S/N overlaps line i.
func (s *Scratch) dominant(i int) bool {
	t := &s.tracks[i]
	for j := range s.tracks {
		o := &s.tracks[j]
		if j == i || !o.seen() || !o.strong && !s.strays(t, o) && (math.Abs(o.snr) <= math.Abs(t.snr) || s.strays(o, t)) {
			continue
		}
		d := spectrum.SpeedOfLight*(o.lam0/t.lam0-1) + o.v - t.v
		if math.Abs(d) < 1.5*(o.s+t.s) {
			return false
		}
	}
	return true
}

// strayShare is the part of a box's S/N that a line nearer to the feature must have.
const strayShare = 0.5

// strays reports whether the box of a broad line has gone more than half of its way to
// a feature that lies nearer to another one, as that of N V to Lyman-alpha.
func (s *Scratch) strays(a, b *track) bool {
	return a.broad && b.broad && sign(a.snr) == sign(b.snr) && math.Abs(a.v) > 0.5*s.opt.search(true) &&
		math.Abs(b.v) < math.Abs(a.v) && math.Abs(b.snr) > strayShare*math.Abs(a.snr)
}

// claimPixels lists the ranges of 3 sigma around the strong lines, joined
// where they touch.
func (s *Scratch) claimPixels() {
	s.claims = s.claims[:0]
	for i := range s.tracks {
		t := &s.tracks[i]
		if !t.strong {
			continue
		}
		mu := t.lam0 * (1 + t.v/spectrum.SpeedOfLight)
		d := 3 * t.s * t.lam0 / spectrum.SpeedOfLight
		lo, hi := mu-d, mu+d
		// Wide ones may reach back over several.
		for len(s.claims) > 0 && lo <= s.claims[len(s.claims)-1].Hi {
			last := s.claims[len(s.claims)-1]
			lo, hi = min(lo, last.Lo), max(hi, last.Hi)
			s.claims = s.claims[:len(s.claims)-1]
		}
		s.claims = append(s.claims, Band{lo, hi})
	}
}

// nearClaim reports whether a claim lies in the region that the search of a
// line looks at.
func (s *Scratch) nearClaim(t *track) bool {
	d := t.lam0 / spectrum.SpeedOfLight * max(2*s.opt.WindowKms, 6*t.s+math.Abs(t.v))
	return onSky(s.claims, t.lam0-d, t.lam0+d)
}

func blank(l *line) Result {
	nan := math.NaN()
	return Result{Name: l.Name, RestWave: l.Wave, Kind: Unmeasured, EWRest: nan, EWRestErr: nan, EWSum: nan, EWSumErr: nan,
		Flux: nan, FluxErr: nan, OffsetKms: nan, OffsetErr: nan, WidthKms: nan, WidthErr: nan, SNR: nan, Continuum: nan, UpperLimit: nan,
		Shape: [2]float64{nan, nan}, ShapeErr: [2]float64{nan, nan}}
}

// nextInGroup returns the distance, km/s, from line i to the nearest other one
// of its group, for a broad line to the nearest broad one of another ion,
// whatever its group; infinite when there is none.
func (s *Scratch) nextInGroup(i int, broad bool) float64 {
	ls := s.meter.lines
	d := math.Inf(1)
	if ls[i].group < 0 && !broad {
		return d
	}
	for j := range ls {
		if j == i || broad && (ls[j].narrow || ls[j].ion == ls[i].ion) {
			continue
		}
		if broad || ls[j].group == ls[i].group {
			d = min(d, spectrum.SpeedOfLight*math.Abs(ls[j].Wave/ls[i].Wave-1))
		}
	}
	return d
}

// search slides boxes of 3 sigma, for widths growing by 1.5, around the place
// of the line and keeps the one whose mean stands out most from its flanks. A
// box of 2.8 sigma has 94 % of the S/N of a matched Gaussian, so that steps of
// 1.5 in width lose little. Only the sign counts that the list expects.
func (s *Scratch) search(t *track) {
	c := t.center
	low := max(t.sres, 0.7*t.pix)
	high := math.Hypot(s.opt.widthMax(t.line, t.broad), t.sres)
	// A box must not swallow the neighbor.
	if t.broad {
		low = max(low, 400)
		high = min(high, max(1000, 0.6*t.next))
	} else {
		high = min(high, max(low, 0.25*t.next))
	}
	limit := s.opt.search(t.broad)
	high = max(high, low)
	if s.bar[t.index] == strayed {
		high = 0
	}
	last := -1
	var best float64
	for sg := low; sg <= high; sg *= 1.5 {
		h := max(1, int(math.Round(1.5*sg/t.pix-0.5)))
		if h == last {
			continue
		}
		last = h
		reach := int(min(limit, max(300, sg)) / t.pix)
		step := max(1, h/2)
		inner := int(2.5*sg/t.pix) + 1
		outer := max(inner+h+2, int(s.opt.WindowKms/t.pix))
		reach -= reach % step
		for j := c - reach; j <= c+reach; j += step {
			w, wr, n := s.box(t.arm, j-h, j+h+1)
			if n < 0.6*float64(2*h+1) || !(w > 0) {
				continue
			}
			ow, owr, _ := s.box(t.arm, j-outer, j+outer+1)
			iw, iwr, _ := s.box(t.arm, j-inner, j+inner+1)
			mean, variance := wr/w, 1/w
			if fw := ow - iw; fw > 0.1*ow {
				mean -= (owr - iwr) / fw
				variance += 1 / fw
			}
			snr := mean / math.Sqrt(variance)
			if (snr > 0 && (t.line.Seen == Absorption || s.bar[t.index] != inList)) || (snr < 0 && t.line.Seen == Emission) {
				continue
			}
			if math.Abs(snr) > math.Abs(best) {
				best = snr
				t.v, t.s = float64(j-c)*t.pix, float64(2*h+1)*t.pix/3
			}
		}
	}
	t.snr = best
	if !t.seen() {
		t.v, t.s = 0, max(math.Hypot(s.opt.guess(t.broad), t.sres), 0.5*t.pix)
	}
}

func (t *track) seen() bool { return math.Abs(t.snr) >= freeFrom }

// covered reports whether enough pixels of the line can be used; if not it
// writes the reason.
func (s *Scratch) covered(t *track) bool {
	if !s.anyContinuum(t) {
		t.result.Reason = ReasonNoContinuum
		return false
	}
	var core, wide, edge float64
	for k := range s.arms {
		a := &s.arms[k]
		n := len(a.Wave)
		if n < 2 || t.lam0 < a.Wave[0] || t.lam0 > a.Wave[n-1] {
			continue
		}
		mu := t.lam0 * (1 + t.v/spectrum.SpeedOfLight)
		for _, f := range [2]float64{1.5, SumHalfWidth} {
			d := f * t.lam0 * t.s / spectrum.SpeedOfLight
			width := 0.0
			last := min(n-1, a.index(mu+d))
			for i := max(0, a.index(mu-d)-1); i <= last; i++ {
				if s.good(k, i) > 0 {
					p, q := pixelEdges(a.Wave, i)
					width += max(0, min(q, mu+d)-max(p, mu-d))
				}
			}
			if f < 2 {
				core = max(core, width/(2*d))
			} else {
				wide = max(wide, width/(2*d))
				edge = max(edge, min(1, (min(mu+d, a.Wave[n-1])-max(mu-d, a.Wave[0]))/(2*d)))
			}
		}
	}
	if core >= s.opt.MinGood && wide >= s.opt.MinGood {
		return true
	}
	t.result.Reason = ReasonMasked
	if edge < s.opt.MinGood {
		t.result.Reason = ReasonOffEdge
	}
	return false
}

// anyContinuum reports whether the continuum is finite near the line.
func (s *Scratch) anyContinuum(t *track) bool {
	a := &s.arms[t.arm]
	c := a.nearest(t.lam0)
	h := int(t.s/t.pix) + 2
	for i := max(0, c-h); i < min(len(a.Cont), c+h+1); i++ {
		if !math.IsNaN(a.Cont[i]) && !math.IsInf(a.Cont[i], 0) {
			return true
		}
	}
	return false
}
