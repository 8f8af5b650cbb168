package lines

import (
	"math"

	"duskline/linelist"
	"duskline/spectrum"
)

// Lines of hydrogen that crowd at the limit of their series stand among others: H-epsilon and
// later ones among Ca II and the lines of cool stars, Pa10 and later ones among the Ca II
// triplet. So do [S III] 6312 beside [O I] and He I 6678 beside [S II]. Where nothing of
// them can be seen they would only take from those.

// crowdBalmer and crowdPaschen are the vacuum wavelengths, Angstrom, below which.
const crowdBalmer, crowdPaschen = 4000.0, 9100.0

// crowds returns the lower level of a line of hydrogen near the limit of its series, 0 for others.
func crowds(l *linelist.Line) int {
	switch {
	case l.Ion != hydrogenIon:
	case l.Wave > 3640 && l.Wave < crowdBalmer:
		return 2
	case l.Wave > 8200 && l.Wave < crowdPaschen:
		return 3
	}
	return 0
}

// faint tells the faint lines of nebulae that stand beside others.
func faint(l *linelist.Line) seenFaint {
	switch {
	case crowds(l) == 3:
		return paschen
	case l.Name == "HeI_6678":
		return heliumRed
	case l.Name == "SIII_6312":
		return sulfur
	}
	return 0
}

// seenFaint is a set of them.
type seenFaint byte

const (
	paschen seenFaint = 1 << iota
	heliumRed
	sulfur
)

// proof are the lines that show the set: those of Paschen that no line of Ca II or band of the sky is near.
var proof = [...]struct {
	name string
	set  seenFaint
}{{"Pa11", paschen}, {"Pa12", paschen}, {"Pa14", paschen}, {"HeI_6678", heliumRed}, {"SIII_6312", sulfur}}

// expectation returns Options.Expect without the lines that objects of its kind do not
// have as long as hydrogen does not shine in them, and with the faint ones that are seen.
func (s *Scratch) expectation(shines bool, seen seenFaint) func(*linelist.Line) bool {
	expect := s.opt.asked
	switch {
	case expect == nil:
		return diffuse[seen]
	case s.cool() && shines:
		return func(l *linelist.Line) bool {
			return crowds(l) != 3 && (l.Ion == helium && l.Name != "HeI_3889" || expect(l)) // 3889 is not told from H8
		}
	case s.cool() && !s.opt.Stark:
		return func(l *linelist.Line) bool { return crowds(l) == 0 && expect(l) }
	}
	return func(l *linelist.Line) bool { return faint(l)&paschen&^seen == 0 && expect(l) } // helium absorbs in stars
}

// diffuse are the expectations of what is no star, by the faint lines that are seen.
var diffuse = func() (f [2 * sulfur]func(*linelist.Line) bool) {
	for k := range f {
		f[k] = func(l *linelist.Line) bool { return faint(l)&^seenFaint(k) == 0 }
	}
	return f
}()

// star reports whether the object is one: of others everything is expected.
func (s *Scratch) star() bool { return s.meter != s.labeled.diffuse }

// cool reports whether a star has no helium.
func (s *Scratch) cool() bool {
	i := s.labeled.find("HeI_5876")
	return s.opt.asked != nil && i >= 0 && !s.opt.asked(&s.labeled.lines[i].Line)
}

// glows reports whether faint lines of nebulae are seen at offset and width of hydrogen, and then expects them.
// Quasars and active galaxies have none: with widths of theirs they are wings of others.
func (s *Scratch) glows() bool {
	if s.opt.Broad || s.cool() {
		return false
	}
	var bright *track
	for i := range s.tracks {
		if t := &s.tracks[i]; t.line.series() == 2 && t.line.Wave > 4800 && t.snr >= firmSNR && (bright == nil || t.snr > bright.snr) {
			bright = t
		}
	}
	if bright == nil {
		return false
	}
	claims := s.claims
	s.claims = s.claims[:0]
	s.survey()
	var sum, weight [sulfur + 1]float64
	for _, p := range proof {
		for i := range s.tracks {
			t := &s.tracks[i]
			if t.line.Name != p.name || s.opt.asked != nil && !s.opt.asked(&t.line.Line) {
				continue
			}
			mu := t.lam0 * (1 + bright.v/spectrum.SpeedOfLight)
			f := place(&s.arms[t.arm], mu, bright.s)
			if h := s.above(t.arm, &f); h.variance > 0 {
				rough := s.relief(t.arm, mu, bright.s)
				w := 1 / (h.variance + rough*rough)
				sum[p.set] += w * h.mean
				weight[p.set] += w
			}
		}
	}
	var seen seenFaint
	for _, set := range [...]seenFaint{paschen, heliumRed, sulfur} {
		if weight[set] > 0 && sum[set] >= freeFrom*math.Sqrt(weight[set]) {
			seen |= set
		}
	}
	s.claims = claims
	s.survey()
	if seen != 0 {
		s.opt.Expect = s.expectation(true, seen)
	}
	return seen != 0
}

// flares reports whether hydrogen shines in a star without helium, and then expects the lines
// that were left out.
func (s *Scratch) flares() bool {
	if !s.cool() {
		return false
	}
	for i := range s.tracks {
		if t := &s.tracks[i]; t.line.series() == 2 && (s.firm(t, 0) || s.firm(t, 1)) {
			s.opt.Expect = s.expectation(true, 0)
			return true
		}
	}
	return false
}
