package lines

import "duskline/linelist"

// Lines of hydrogen that crowd at the limit of their series stand among others: H-epsilon and
// later ones among Ca II and the lines of cool stars, Pa10 and later ones among the Ca II
// triplet. So do [S III] 6312 beside [O I] and He I 6678 beside [S II]. Where nothing of
// them can be seen they would only take from those.

// crowdBalmer and crowdPaschen are the vacuum wavelengths, Angstrom, below which.
const crowdBalmer, crowdPaschen = 4000.0, 9100.0

// glowSNR is the S/N of H-alpha or H-beta from which lines of a hundredth of its flux may be seen: He I
// 6678 has 0.011 of H-alpha, Pa10 0.006 (case B at 1e4 K, Osterbrock & Ferland 2006, from memory).
const glowSNR = 50.0

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

// bare reports whether a line is expected of all but the brightest nebulae.
func bare(l *linelist.Line) bool {
	return crowds(l) != 3 && l.Name != "HeI_6678" && l.Name != "SIII_6312"
}

// expectation returns Options.Expect without the lines that objects of its kind do
// not have as long as hydrogen does not shine in them, and with those that they have when it does.
func (s *Scratch) expectation(opt Options, glows bool) func(*linelist.Line) bool {
	expect := opt.Expect
	switch {
	case expect == nil && glows:
		return nil
	case expect == nil:
		return bare
	case s.cool(opt) && glows:
		return func(l *linelist.Line) bool {
			return crowds(l) != 3 && (l.Ion == helium && l.Name != "HeI_3889" || expect(l)) // 3889 is not told from H8
		}
	case s.cool(opt) && !opt.Stark:
		return func(l *linelist.Line) bool { return crowds(l) == 0 && expect(l) }
	case glows:
		return expect
	}
	return func(l *linelist.Line) bool { return crowds(l) != 3 && expect(l) }
}

// star reports whether the object is one: of others everything is expected.
func (s *Scratch) star() bool { return s.meter != s.labeled.diffuse }

// cool reports whether a star has no helium.
func (s *Scratch) cool(opt Options) bool {
	i := s.labeled.find("HeI_5876")
	return opt.Expect != nil && i >= 0 && !opt.Expect(&s.labeled.lines[i].Line)
}

// glows reports whether hydrogen shines where lines that it then has were left out: at all
// in a star without helium, else as brightly as glowSNR. Quasars and active galaxies never do:
// with widths of theirs such lines are wings of others.
func (s *Scratch) glows(opt Options) bool {
	if s.opt.Broad {
		return false
	}
	least, bluest := glowSNR, 4800.0
	left := s.cool(opt)
	if left {
		least, bluest = firmSNR, 0
	}
	bright := false
	for i := range s.tracks {
		t := &s.tracks[i]
		left = left || !bare(&t.line.Line)
		if t.line.series() == 2 && t.line.Wave > bluest {
			for part, r := range t.parts() {
				bright = bright || s.firm(t, part) && r.SNR >= least
			}
		}
	}
	return bright && left
}
