package redshift

import (
	"math"
	"slices"
)

// A model that the data single out may still promise what they lack: bumps, steps and lines of
// something else fit two of its lines and none of the others.
const (
	// promiseSNR is the signal-to-noise from which a promise counts, of all weak lines together or of the
	// forest, and brokenShare the share of it below which it is broken: as for one strong line, missingSNR, but
	// with less noise on the strength, as it is none of many that could be missing.
	promiseSNR  = 3.0
	brokenShare = 1.0 / 3
	// weakParts is the number of weak features, with a signal-to-noise of partSNR, that it takes to count together as one that stands out.
	weakParts = 2
	partSNR   = 1.5
	// weakModel is the least signal-to-noise that a line is promised with.
	weakModel = 0.5
	// sightlines is the scatter of the forest's depth, over the some 50,000 km/s that a spectrum shows, from one sightline to the
	// next, with what the continuum behind it leaves in doubt (common practice, no source).
	sightlines = 0.25
	// undimmed is how many times what the forest leaves of the light on the red side stands blueward of Lyman-alpha at least where none is. A
	// quasar's light rises blueward, to 1.3 times from one window to the other (slope -1.5, Vanden Berk et al. 2001, from memory); what is no brighter than this has its forest, whatever the joint fit made
	// of a step under a bright line.
	undimmed = 1.1
)

// lightBlue and lightRed are rest wavelengths, Angstrom, without strong emission lines on either side of Lyman-alpha.
var (
	lightBlue = [2]float64{1050, 1170}
	lightRed  = [2]float64{1270, 1380}
)

// lightPixels are those that a window of light needs.
const lightPixels = 50

// promise is a feature of the model: lines of one sign that overlap.
type promise struct {
	wave, width float64
	absorption  bool
	seen        bool
	snr, model  float64 // of its strongest line
}

// keeps tells what of its promises the winning model keeps, from the lines measured.
func (s *Scratch) keeps(p *peak, res *Result) {
	switch model, share, parts := s.weakLines(res.Lines); {
	case model > promiseSNR && share < brokenShare:
		res.WeakMissing = true
		res.LinesMissing++
	case model*share > missingSNR && parts >= weakParts:
		res.LinesSeen++ // by themselves none stands out, together they do
	}
	for c := range p.family.components {
		if !p.family.components[c].forest {
			continue
		}
		amp, sigma, ok := s.bench.alone(c, &p.fit)
		sigma *= math.Sqrt(res.Correlation)
		if ok && promiseSNR*sigma < 1 && 1-amp > promiseSNR*math.Hypot(sigma, sightlines) && !s.dimmed(p) {
			res.ForestMissing = true
			res.LinesMissing++
		}
	}
}

// dimmed reports whether the light blueward of Lyman-alpha is as low, against that redward, as the mean forest at
// the redshift leaves it. It is that of the last evaluate; false where the windows are not covered.
func (s *Scratch) dimmed(p *peak) bool {
	veil := s.bench.veil.values
	light := func(window [2]float64) (sum, through float64, n int) {
		l := &s.full
		lo, hi := l.pixel(math.Log10(window[0])+p.shift), l.pixel(math.Log10(window[1])+p.shift)
		for i := lo; i < hi; i++ {
			if s.weight[i] > 0 {
				sum += s.scaled[i]
				through += 1 + veil[i]
				n++
			}
		}
		return sum / float64(max(1, n)), through / float64(max(1, n)), n
	}
	blue, through, n := light(lightBlue)
	red, _, m := light(lightRed)
	return n >= lightPixels && m >= lightPixels && blue < undimmed*through*red
}

// weakLines returns the signal-to-noise that the model says for all features together that do not stand out by
// themselves, sqrt(sum m^2), and the share of it that the data have, sum(m s)/sum(m^2): about 1 where the model is right, whichever are left out for standing out. Their product is the signal-to-noise of all together; parts of them have partSNR.
func (s *Scratch) weakLines(lines []LineEvidence) (model, share float64, parts int) {
	s.byWave = s.byWave[:0]
	for i, e := range lines {
		if e.Model > weakModel {
			s.byWave = append(s.byWave, i)
		}
	}
	slices.SortStableFunc(s.byWave, func(a, b int) int {
		switch {
		case lines[a].Wave < lines[b].Wave:
			return -1
		case lines[a].Wave > lines[b].Wave:
			return 1
		}
		return 0
	})
	s.promises = s.promises[:0]
	for _, i := range s.byWave {
		e := &lines[i]
		k := slices.IndexFunc(s.promises, func(o promise) bool {
			return o.absorption == e.Absorption && (e.Wave/o.wave-1)*speedOfLight < math.Max(featureKms, e.Width+o.width)
		})
		if k < 0 {
			s.promises = append(s.promises, promise{e.Wave, e.Width, e.Absorption, e.Seen, e.SNR, e.Model})
			continue
		}
		o := &s.promises[k]
		seen := o.seen || e.Seen
		if e.Model > o.model {
			*o = promise{e.Wave, e.Width, e.Absorption, seen, e.SNR, e.Model}
		}
		o.seen = seen
	}
	mm, ms := 0.0, 0.0
	for _, o := range s.promises {
		if !o.seen {
			mm += o.model * o.model
			ms += o.model * o.snr
			if o.snr > partSNR {
				parts++
			}
		}
	}
	if mm == 0 {
		return 0, 1, 0
	}
	return math.Sqrt(mm), ms / mm, parts
}

// alone returns the amplitude of component c that the data of the last evaluate, whose answer was f, ask
// for when it may have either sign, and its standard error, the spline and the amplitudes of the components in use being free. It
// reports false where the component is not covered or not told from the others.
func (b *bench) alone(c int, f *fit) (amp, sigma float64, ok bool) {
	k := slices.Index(b.used[:b.m], c)
	if k < 0 || b.g[k*maxComponents+k] <= 0 {
		return 0, 0, false
	}
	var free [maxComponents]bool
	for i := range b.m {
		free[i] = i == k || f.amp[b.used[i]] > 0
	}
	var all, unit, column [maxComponents]float64
	unit[k] = 1
	if !solveSubset(&all, &b.g, &b.h, &free, b.m) || !solveSubset(&column, &b.g, &unit, &free, b.m) {
		return 0, 0, false
	}
	return all[k], math.Sqrt(column[k]), true
}

// together is the signal-to-noise, with which the data have them, of the lines of the model that pick picks.
func together(lines []LineEvidence, pick func(*LineEvidence) bool) float64 {
	mm, ms := 0.0, 0.0
	for i := range lines {
		if e := &lines[i]; e.Model > 0 && pick(e) {
			mm += e.Model * e.Model
			ms += e.Model * e.SNR
		}
	}
	if mm == 0 {
		return 0
	}
	return ms / math.Sqrt(mm)
}

// dark reports whether a family that lives on emission lines is claimed without: none stands out, nor do all of them together.
func dark(p *peak, res *Result) bool {
	return p.family.shining() && !res.InEmission && together(res.Lines, func(e *LineEvidence) bool { return !e.Absorption }) < SeenSNR
}

// foreground reports whether all that a star stands on may be gas of our own Galaxy, which
// absorbs in front of whatever is behind it: the rest of the model's lines together are no feature, nor is a band or break.
// The names are those of the lines that this gas shows.
func foreground(p *peak, lines []LineEvidence, bands int, gas []string) bool {
	if p.family.Class != "star" || bands > 0 {
		return false
	}
	return together(lines, func(e *LineEvidence) bool { return !slices.Contains(gas, e.Name) }) < SeenSNR
}

// shining reports whether a family is one of emission lines: all lines that its members should show are.
func (f *Family) shining() bool {
	for _, e := range f.expected {
		if !slices.ContainsFunc(f.components, func(c component) bool {
			return !c.absorption && slices.ContainsFunc(c.terms, func(t term) bool { return t.name == e.name })
		}) {
			return false
		}
	}
	return len(f.expected) > 0
}
