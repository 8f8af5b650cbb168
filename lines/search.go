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
		t.broad = s.opt.Broad && !l.forbidden && l.Seen != Absorption
		t.result = blank(l)
		t.s = max(math.Hypot(s.opt.WidthGuess, t.sres), 0.5*t.pix)
		s.search(&t, c, s.nextInGroup(i))
		t.usable = s.covered(&t)
		s.tracks = append(s.tracks, t)
	}
}

func blank(l *line) Result {
	nan := math.NaN()
	return Result{Name: l.Name, RestWave: l.Wave, Kind: Unmeasured, EWRest: nan, EWRestErr: nan, EWSum: nan, EWSumErr: nan,
		Flux: nan, FluxErr: nan, OffsetKms: nan, OffsetErr: nan, WidthKms: nan, WidthErr: nan, SNR: nan, Continuum: nan, UpperLimit: nan}
}

// nextInGroup returns the distance, km/s, from line i to the nearest other one
// of its group, infinite when it stands alone.
func (s *Scratch) nextInGroup(i int) float64 {
	ls := s.meter.lines
	d := math.Inf(1)
	for _, j := range [2]int{i - 1, i + 1} {
		if j >= 0 && j < len(ls) && ls[i].group >= 0 && ls[j].group == ls[i].group {
			d = min(d, spectrum.SpeedOfLight*math.Abs(ls[j].Wave/ls[i].Wave-1))
		}
	}
	return d
}

// search slides boxes of 3 sigma, for widths growing by 1.5, around the place
// of the line and keeps the one whose mean stands out most from its flanks. A
// box of 2.8 sigma has 94 % of the S/N of a matched Gaussian, so that steps of
// 1.5 in width lose little.
func (s *Scratch) search(t *track, c int, next float64) {
	low := max(t.sres, 0.7*t.pix)
	high := math.Hypot(s.opt.widthMax(t.broad), t.sres)
	if t.broad {
		low = max(low, 400)
	} else if next > 2*low {
		high = min(high, 0.5*next)
	}
	limit := s.opt.search(t.broad)
	last := -1
	var best float64
	for sg := low; sg <= max(high, low); sg *= 1.5 {
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
			if snr := mean / math.Sqrt(variance); math.Abs(snr) > math.Abs(best) {
				best = snr
				t.v, t.s = float64(j-c)*t.pix, float64(2*h+1)*t.pix/3
			}
		}
	}
	t.snr = best
	if !t.seen() {
		t.v, t.s = 0, max(math.Hypot(s.opt.WidthGuess, t.sres), 0.5*t.pix)
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
			for i := max(0, a.index(mu-d)-1); i <= min(n-1, a.index(mu+d)); i++ {
				if a.good(i) > 0 {
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
