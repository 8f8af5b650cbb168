package redshift

import (
	"cmp"
	"math"
	"slices"
)

// Verdict is the final word on a redshift.
type Verdict int

// The verdicts.
const (
	None      Verdict = iota // no redshift can be told
	Uncertain                // a redshift that a person should look at
	Secure                   // a redshift that can be used as it stands
)

// String returns "none", "uncertain" or "secure".
func (v Verdict) String() string { return [...]string{"none", "uncertain", "secure"}[v] }

// Thresholds steers Judge. By the defaults, in configs/default.toml, a wrong
// answer is as likely as a right one without a gap, and its chance falls by e
// for each 4.5 units of score, in units of the misfit. Scale and limits were
// set by hand on open survey spectra with published redshifts; they are not a
// calibration.
type Thresholds struct {
	SecureConfidence float64 // least confidence of a secure redshift
	SecureLines      int     // least number of features that stand out by themselves, less those that are missing
	NoneConfidence   float64 // below this confidence and without a feature the verdict is none
	GapScale         float64 // the gap over which the chance of a wrong answer falls by e
	MisfitChi2       float64 // chi^2 per degree of freedom from which a fit is a misfit
	HopelessChi2     float64 // and from which it is never secure
	TiedGap          float64 // gap below which the rival is tied
	TiedShare        float64 // the same as a share of what the winner lowers chi^2 by
	FaintSNR         float64 // signal-to-noise a pixel below which a spectrum without features is faint
}

// overwhelming is how many times the gap that a secure redshift needs makes up
// for one missing feature.
const overwhelming = 3

// pairShare takes the place of TiedShare for a quasar on no more features than it needs: broad lines have no
// form by which they are known, and any two bumps stand as far apart as some two lines.
const pairShare = 0.2

// secondObject is the number of leftovers that tell of another object; one may be a cosmic ray.
const secondObject = 2

// Judge sets Confidence, Verdict and the doubts that follow from thresholds. A
// verdict other than Secure comes with a doubt that says why.
func (t Thresholds) Judge(r *Result) {
	r.Confidence = 0
	if !r.Found {
		r.Verdict = None
		r.Faint, r.LowConfidence = r.SNR < t.FaintSNR, !r.FewPixels
		return
	}
	r.Confidence = 1 - 0.5*math.Exp(-r.Gap/(t.GapScale*math.Max(1, math.Max(r.Chi2Dof, r.Correlation))))
	// Templates describe what is there to a share of it, and no better in bright spectra: a rival that
	// explains nearly all that the winner does may be the right one for any number of sigmas.
	share := t.TiedShare
	if r.Class == "quasar" && r.LinesSeen <= t.SecureLines {
		share = math.Max(share, pairShare)
	}
	r.Tied = r.Gap < t.TiedGap || r.Gap < share*r.Drop
	r.Misfit = r.Chi2Dof > t.MisfitChi2 || r.Chi2Dof >= t.HopelessChi2
	r.Faint = r.LinesSeen == 0 && r.SNR < t.FaintSNR
	r.LoneLine = r.LinesSeen == 1
	r.Unseen = r.LinesExpected > 0 && 2*r.LinesCovered < r.LinesExpected
	r.Unexplained = len(r.Leftovers) >= secondObject
	clear := r.LinesSeen - r.LinesOfAir - r.LinesMissing
	if r.Unexplained {
		clear -= len(r.Leftovers) // each speaks against as one line does for
	}
	r.OnSky = r.LinesOfAir > 0 && r.LinesSeen-r.LinesOfAir < t.SecureLines
	enough := clear >= t.SecureLines
	if clear == t.SecureLines-1 && !r.InEmission {
		// One feature short: many weak ones must make up for it. A lone emission
		// line may be a cosmic ray or another line.
		enough = 1-r.Confidence <= 0.5*math.Pow(2*(1-t.SecureConfidence), overwhelming)
	}
	r.FewLines = !enough || r.Dark || r.Foreground || r.Class == "quasar" && !r.InEmission
	r.LowConfidence = !(r.Confidence >= t.SecureConfidence)
	switch {
	case !r.LowConfidence && !r.FewLines && !r.Tied && r.Chi2Dof < t.HopelessChi2 && !r.RangeEnd && !r.Bare() && !r.Blind() && !r.Scattered && r.LinesMissing == 0:
		r.Verdict = Secure
	case r.LinesSeen == 0 && r.Confidence < t.NoneConfidence:
		r.Verdict = None
	default:
		r.Verdict = Uncertain
	}
}

// StrongMissing is the number of single lines that the model predicts strongly and the data lack.
func (r *Result) StrongMissing() int {
	n := r.LinesMissing
	for _, also := range [2]bool{r.WeakMissing, r.ForestMissing} {
		if also {
			n--
		}
	}
	return n
}

// Bare reports whether the spectrum of an extragalactic object lacks what tells
// it from absorbers in front of it: broad lines and breaks, divided away with
// the continuum.
func (r *Result) Bare() bool { return r.Normalized && (r.Class == "galaxy" || r.Class == "quasar") }

// Blind reports whether a galaxy or quasar is claimed on a piece of its spectrum
// that shows less than half of the lines it should have, by a model that does not
// fit: a stretch of forest passes for many things.
func (r *Result) Blind() bool {
	return r.Misfit && r.Unseen && (r.Class == "galaxy" || r.Class == "quasar")
}

// countFeatures counts the lines that stand out by themselves, lines that
// overlap within their widths, or are nearer than apart pixels, as one.
func countFeatures(lines []feature, apart float64) int {
	slices.SortFunc(lines, func(a, b feature) int {
		switch {
		case a.center < b.center:
			return -1
		case a.center > b.center:
			return 1
		}
		return 0
	})
	n := 0
	for i, f := range lines {
		if i == 0 || f.center-lines[i-1].center > math.Max(f.sigma+lines[i-1].sigma, apart) {
			n++
		}
	}
	return n
}

// feature is a line that stands out, in pixels, with its signal-to-noise; air says
// that the night sky or water may have made it.
type feature struct {
	center, sigma, snr float64
	air                bool
}

// leaders leaves out what stands beside a broad line of four times its
// signal-to-noise: broad from a sigma of broad pixels on, beside up to reach pixels.
func leaders(lines []feature, broad, reach float64) []feature {
	// Strongest first: none is left out for one that comes after it.
	slices.SortFunc(lines, func(a, b feature) int { return cmp.Or(cmp.Compare(b.snr, a.snr), cmp.Compare(a.center, b.center)) })
	kept := lines[:0]
	for _, f := range lines {
		if !slices.ContainsFunc(kept, func(o feature) bool {
			return o.sigma >= broad && o.snr > 4*f.snr && math.Abs(o.center-f.center) < reach
		}) {
			kept = append(kept, f)
		}
	}
	return kept
}
