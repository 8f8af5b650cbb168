package lines

import (
	"math"
	"slices"

	"duskline/spectrum"
)

// Emission in stars and galaxies has to stand above more than the noise. Where
// absorption lines and bands crowd, the continuum given is a mean of what they leave, and
// the gaps between them lie above it without anything shining there. Two things
// tell a gap from a line, both in the spectrum itself: how deep the dips
// around it are (relief), and whether a line of the same ion that nature makes
// stronger is there (denied).

// clearEmission takes all lines measured in emission away from the residuals, the
// absorption under them that was told apart, and firm absorption by lines that the list groups, such as
// Na I D beside He I: several at one offset are no unknown dip.
func (s *Scratch) clearEmission() {
	for i := range s.tracks {
		t := &s.tracks[i]
		for _, r := range t.parts() {
			known := r.Kind == Absorption && (t.shines() || r.SNR >= firmSNR && t.line.group >= 0)
			if r.Kind != Emission && !known {
				continue
			}
			mu, sigma := r.place(t)
			d := sigma * mu / spectrum.SpeedOfLight
			for k := range s.arms {
				a, o := &s.arms[k], s.first[k]
				for j := a.index(mu - profileReach*d); j < len(a.Wave) && a.Wave[j] < mu+profileReach*d; j++ {
					u := (a.Wave[j] - mu) / d
					s.resid[o+j] -= r.Flux * invSqrt2Pi / d * decay(0.5*u*u)
				}
			}
		}
	}
	s.claims = s.claims[:0]
	s.survey()
}

// shines reports whether a part of the line is in emission.
func (t *track) shines() bool { return t.result.Kind == Emission || t.second.Kind == Emission }

// place returns observed center and total Gaussian sigma, km/s, of a result.
func (r *Result) place(t *track) (mu, sigma float64) {
	v := r.OffsetKms
	if math.IsNaN(v) {
		v = 0
	}
	return t.lam0 * (1 + v/spectrum.SpeedOfLight), max(math.Hypot(r.WidthKms, t.sres), 0.5*t.pix)
}

// bump returns the mean height over +-1 sigma of a line in emission, with
// what other lines of its ion add there.
func (s *Scratch) bump(t *track, r *Result) (mu, sigma, peak float64) {
	mu, sigma = r.place(t)
	for i := range s.tracks {
		o := &s.tracks[i]
		if o.result.Kind != Emission || o.line.ion != t.line.ion || o != t && r == &t.second {
			continue
		}
		q := &o.result
		if o == t {
			q = r
		}
		at, width := q.place(o)
		u := spectrum.SpeedOfLight * (at/mu - 1) / width
		if u*u < 2*decayEnd {
			peak += q.Flux * invSqrt2Pi * spectrum.SpeedOfLight / (width * at) * decay(0.5*u*u)
		}
	}
	return mu, sigma, boxShare * peak
}

const (
	// firmSNR and firmHeight are the S/N, and the height in units of the dips
	// around it, from which a line is beyond doubt and speaks for others.
	firmSNR, firmHeight = 10.0, 5.0
	// allyHeight is the height from which emission is believed where a firm line has its
	// offset and width: a gap would have to lie in the one place. Common practice, no source.
	allyHeight = 1.5
	// kinHeight is that where the firm line is one of the same ion. Common practice, no source.
	kinHeight = 1.0
	// Allies differ by less than this part of the width in offset, and by less than this
	// factor in width.
	allyOffset, allyWidth = 0.5, 1.5
)

// judge notes how the emission of a line stands against the dips around it.
func (s *Scratch) judge(t *track, part int) {
	r := t.parts()[part]
	mu, sigma, peak := s.bump(t, r)
	rough := s.relief(t.arm, mu, sigma)
	t.high[part] = math.Inf(1)
	if rough > 0 {
		t.high[part] = peak / rough
	}
	t.doubt[part] = ""
	if peak < seenFrom*math.Hypot(peak/r.SNR, rough) && rough > 0 {
		t.doubt[part] = ReasonCrowded
	}
}

// acquit clears lines that a firm one with the same offset and width speaks for, if no
// stronger one of their ion is missing.
func (s *Scratch) acquit() {
	for i := range s.tracks {
		t := &s.tracks[i]
		for part, r := range t.parts() {
			if t.doubt[part] == "" || t.high[part] < kinHeight || s.lacksSister(t) {
				continue
			}
			_, sigma := r.place(t)
			for j := range s.tracks {
				o := &s.tracks[j]
				for k, q := range o.parts() {
					if o == t || !s.firm(o, k) || o.line.ion != t.line.ion && t.high[part] < allyHeight {
						continue
					}
					_, width := q.place(o)
					if math.Abs(q.OffsetKms-r.OffsetKms) < allyOffset*width && max(width/sigma, sigma/width) < allyWidth {
						t.doubt[part] = ""
					}
				}
			}
		}
	}
}

// narrowShock is the sigma, km/s, up to which hydrogen may shine in a higher Balmer
// line alone: that of shocks in pulsating red stars, whose bands hide H-alpha.
// Common practice, no source.
const narrowShock = 200.0

// lacksSister reports whether a stronger line of the ion is covered and not in emission.
func (s *Scratch) lacksSister(t *track) bool {
	for _, sister := range s.meter.sisters[t.index] {
		for i := range s.tracks {
			if r := &s.tracks[i].result; s.tracks[i].index == sister && (r.Kind == Limit || r.Kind == Absorption) && !r.OnSky {
				return true
			}
		}
	}
	return false
}

// acquitTwins clears lines that share their amplitude with one that stands.
func (s *Scratch) acquitTwins() {
	for i := range s.tracks {
		for j := range s.tracks {
			t, o := &s.tracks[i], &s.tracks[j]
			if d := t.line.doublet; i == j || d < 0 || o.line.doublet != d {
				continue
			}
			for part, r := range o.parts() {
				if r.Kind == Emission && o.doubt[part] == "" {
					t.doubt[part] = ""
				}
			}
		}
	}
}

// deniedFrom is by how many errors a stronger line must be too weak, of which noise counts skyDoubt
// times in bands of the sky, whose residuals it does not know. Common practice, no source.
const deniedFrom, skyDoubt = 2.0, 2.0

// vouched reports whether a firm line of the ion shines at the offset of a line, itself included.
func (s *Scratch) vouched(t *track, r *Result) bool {
	for i := range s.tracks {
		o := &s.tracks[i]
		for part, q := range o.parts() {
			if o.line.ion != t.line.ion || !s.firm(o, part) {
				continue
			}
			if _, width := q.place(o); math.Abs(q.OffsetKms-r.OffsetKms) < allyOffset*width {
				return true
			}
		}
	}
	return false
}

// firm reports whether a part of a line is in emission beyond doubt.
func (s *Scratch) firm(t *track, part int) bool {
	r := t.parts()[part]
	return r.Kind == Emission && t.doubt[part] == "" && r.SNR >= firmSNR && t.high[part] >= firmHeight
}

// bloatFrom is how many times as wide as the gas of a galaxy none of its narrow lines is: the
// same gas makes them all. Common practice, no source.
const bloatFrom = 2.0

// bloated reports whether a forbidden line, or one of He I, of a galaxy is wider than its gas, by
// the error of its width: that of the strongest forbidden line or, if more, of hydrogen,
// for He I with its broad part.
func (s *Scratch) bloated(t *track, r *Result) bool {
	if s.opt.Broad || s.star() || !(r.WidthErr >= 0) || !t.line.narrow && t.line.ion != helium {
		return false
	}
	var width, best [2]float64
	for i := range s.tracks {
		o := &s.tracks[i]
		for part, q := range o.parts() {
			if o == t || !s.firm(o, part) {
				continue
			}
			hydrogen := 0
			switch {
			case o.line.ion == hydrogenIon && (part == 0 || !t.line.narrow):
				hydrogen = 1
			case !o.line.narrow || part > 0:
				continue
			}
			if q.SNR > best[hydrogen] {
				best[hydrogen], width[hydrogen] = q.SNR, q.WidthKms
			}
		}
	}
	// A width of none is narrower than the instrument, which is not known better than that.
	most := bloatFrom * max(width[0], width[1], t.sres, t.pix)
	return max(best[0], best[1]) > 0 && r.WidthKms-r.WidthErr > most
}

// pairs are lines of one ion, the second at least as strong in flux as the first.
// Case B has He I 4471 at 0.37 of 5876, 6678 at 0.28 and 4026 at 0.17; [O III] 4363 reaches 5007 at
// densities of 1e7, [N II] 5755 6583 at 1e6, and
// [S III] 6312 9069 later still (Osterbrock & Ferland 2006, from memory); [Ne III] 3967
// has 0.30 of 3869, from the same level (Storey & Zeippen 2000, from memory), and [Ne V] 3346 0.37 of
// 3426 (Osterbrock & Ferland 2006, from memory). Dust weakens the bluer line.
var pairs = [][2]string{
	{"HeI_4026", "HeI_4471"}, {"HeI_4026", "HeI_5876"}, {"HeI_4471", "HeI_5876"}, {"HeI_6678", "HeI_5876"},
	{"OIII_4363", "OIII_5007"}, {"NII_5755", "NII_6583"}, {"NeIII_3967", "NeIII_3869"}, {"NeV_3346", "NeV_3426"}, {"SIII_6312", "SIII_9069"},
}

// findSisters lists for every line the stronger ones of its ion: pairs, and the
// lines from lower levels in the Balmer and Paschen series. H-epsilon and later ones speak
// for none: Ca II and their neighbors take from them.
func (m *Meter) findSisters() {
	m.sisters = make([][]int, len(m.lines))
	for _, p := range pairs {
		if i, j := m.find(p[0]), m.find(p[1]); i >= 0 && j >= 0 {
			m.sisters[i] = append(m.sisters[i], j)
		}
	}
	for i := range m.lines {
		for j := range m.lines {
			if a, b := &m.lines[i], &m.lines[j]; a.series() > 0 && a.series() == b.series() && b.Wave > max(a.Wave, 4000) {
				m.sisters[i] = append(m.sisters[i], j)
			}
		}
	}
}

// series returns the lower level of a Balmer or Paschen line, 0 for others.
func (l *line) series() int {
	switch {
	case l.ion != hydrogenIon:
	case l.Wave > 3640 && l.Wave < 6600:
		return 2
	case l.Wave > 8200 && l.Wave < 19000:
		return 3
	}
	return 0
}

// find returns the index of a line, -1 where the list has none of the name.
func (m *Meter) find(name string) int {
	return slices.IndexFunc(m.lines, func(l line) bool { return l.Name == name })
}

// denied reports whether a line that must be stronger is not there: the spectrum, emission
// taken away, has at its place less by deniedFrom errors, dips included.
func (s *Scratch) denied(t *track, r *Result) bool {
	if t.line.series() == 2 && r.WidthKms < narrowShock {
		return false
	}
	mu, sigma, peak := s.bump(t, r)
	for _, sister := range s.meter.sisters[t.index] {
		for i := range s.tracks {
			o := &s.tracks[i]
			if o.index != sister || !o.usable || o.result.Kind == Unmeasured || o.result.Kind == Emission && o.doubt[0] == "" {
				continue
			}
			at := o.lam0 * mu / t.lam0
			f := place(&s.arms[o.arm], at, sigma)
			h := s.above(o.arm, &f)
			if !(h.variance > 0) {
				continue
			}
			least := peak * mu / at // of the same flux a redder line is lower
			noise := math.Sqrt(h.variance)
			if o.result.OnSky {
				if s.vouched(t, r) {
					continue
				}
				noise *= skyDoubt
			}
			err := math.Hypot(least/r.SNR, math.Hypot(noise, s.relief(o.arm, at, sigma)))
			if least-h.mean > deniedFrom*err {
				return true
			}
		}
	}
	return false
}

// How a line is kept from a second round.
const (
	inList   = iota // it is not
	inGap           // its emission was the gap between dips: no box in emission
	inVoid          // its emission was denied: the same
	strayed         // it went to the end of its range: no box
	notThere        // it never emits and took the emission of a neighbor: left out
)

// Blueward of Lyman-alpha, vacuum Angstrom, the forest takes light from quasars: what absorbs
// there as broadly as forestWidth, sigma in km/s, is not told from it.
const forestEnd, forestWidth = 1215.5, 500.0

// chromospheric reports whether a line listed in absorption only is one that stars with active
// chromospheres have in emission.
func (l *line) chromospheric() bool { return l.Name == "CaII_K" || l.Name == "CaII_H" }

// mayShine reports whether a line listed in absorption only may be in emission all the same: Ca II K,
// for which no other line is taken, and in stars H, where K shines.
func (s *Scratch) mayShine(t *track) bool {
	if !t.line.chromospheric() || t.line.Name == "CaII_K" {
		return t.line.chromospheric()
	}
	for i := range s.tracks {
		if k := &s.tracks[i]; s.star() && k.line.Name == "CaII_K" {
			return k.result.Kind == Emission && k.doubt[0] == ""
		}
	}
	return false
}

// weigh takes back what is no line and reports whether a second round without
// it would measure its neighbors better. What strays only in the last round, where nothing
// more can be done for it, keeps its kind.
func (s *Scratch) weigh(last bool) (again bool) {
	// Of quasars neither iron nor the forest is told from dips.
	s.clearEmission()
	if !s.opt.Broad {
		for i := range s.tracks {
			for part, r := range s.tracks[i].parts() {
				if r.Kind == Emission && !s.tracks[i].stands {
					s.judge(&s.tracks[i], part)
				}
			}
		}
		s.acquit()
		s.acquitTwins()
	}
	for i := range s.tracks {
		t := &s.tracks[i]
		for part, r := range t.parts() {
			switch {
			case t.stands:
			case s.merged(t, r):
				blankNumbers(r)
				r.Reason = ReasonNoFit
			case t.doubt[part] == "" && s.beyond(t, r) && (!last || s.bar[t.index] == strayed):
				t.doubt[part] = ReasonAtBound
			case r.Kind == Absorption && t.broad && t.line.Wave < forestEnd && r.WidthKms > forestWidth:
				t.doubt[part] = ReasonCrowded
			case r.Kind != Emission:
			case (t.line.Seen == Absorption || t.line.chromospheric()) && !s.mayShine(t):
				t.doubt[part] = ReasonWrongSign
			case t.doubt[part] == "" && part == 0 && s.bloated(t, r):
				t.doubt[part] = ReasonCrowded
			case t.doubt[part] == "" && !t.broad && (s.bar[t.index] == inVoid || s.denied(t, r)):
				t.doubt[part] = ReasonNoCompanion
			}
		}
	}
	for i := range s.tracks {
		t := &s.tracks[i]
		for part, r := range t.parts() {
			bar := byte(inList)
			switch t.doubt[part] {
			case ReasonAtBound:
				bar = strayed
			case ReasonCrowded:
				bar = inGap
			case ReasonNoCompanion:
				bar = inVoid
			case ReasonWrongSign:
				if r.Blend != "" {
					bar = notThere
				}
			case "":
				continue
			}
			r.takeBack(t.doubt[part])
			if bar != inList && (r.Flux > 0 || bar == strayed) && s.bar[t.index] == inList {
				s.bar[t.index] = bar
				again = again || bar == notThere || bar == strayed || t.seen() && r.Blend != ""
			}
		}
	}
	return again
}

// beyond reports whether the center of a line ended at the limit of its range: what is
// there lies elsewhere, and is something else.
func (s *Scratch) beyond(t *track, r *Result) bool {
	return (r.Kind == Emission || r.Kind == Absorption) && math.Abs(r.OffsetKms) > 0.999*s.opt.search(t.broad)
}

// merged reports whether a line of hydrogen with wide wings is as wide as it may be: its
// neighbors and it are one, and what it has of that is not told.
func (s *Scratch) merged(t *track, r *Result) bool {
	return s.opt.Stark && t.line.ion == hydrogenIon && r.Kind == Absorption && r.WidthKms > 0.999*starkWidest
}

// parts returns the results of a line: its own and that of a second component.
func (t *track) parts() [2]*Result { return [2]*Result{&t.result, &t.second} }

// takeBack makes a line a limit, or what it is without an equivalent width.
func (r *Result) takeBack(why string) {
	if math.IsNaN(r.EWRest) {
		blankNumbers(r)
		r.Reason = why
		return
	}
	r.Kind = Limit
	r.bound()
	r.OffsetKms, r.OffsetErr = math.NaN(), math.NaN()
	if r.Reason == ReasonSum {
		why = sumAnd[why]
	}
	r.Reason = why
}

// sumAnd joins reasons to ReasonSum: the row has the light of others all the same.
var sumAnd = map[string]string{
	ReasonCrowded: ReasonSum + "|" + ReasonCrowded, ReasonWrongSign: ReasonSum + "|" + ReasonWrongSign, ReasonNoCompanion: ReasonSum + "|" + ReasonNoCompanion, ReasonAtBound: ReasonSum + "|" + ReasonAtBound,
}

// recall says of lines that were barred, and are mere limits without it, why they were.
func (s *Scratch) recall() {
	for i := range s.tracks {
		t := &s.tracks[i]
		if t.result.Kind != Limit || t.result.Reason != "" {
			continue
		}
		switch s.bar[t.index] {
		case inGap:
			t.result.Reason = ReasonCrowded
		case inVoid:
			t.result.Reason = ReasonNoCompanion
		case strayed:
			t.result.Reason = ReasonAtBound
		}
	}
}
