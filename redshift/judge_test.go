package redshift

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestJudge(t *testing.T) {
	th := DefaultThresholds()
	good := Result{Found: true, Gap: 100, Chi2Dof: 1, LinesSeen: 5, LinesExpected: 6, LinesCovered: 4, SNR: 5}
	with := func(change func(r *Result)) Result {
		r := good
		change(&r)
		return r
	}
	for _, c := range []struct {
		name    string
		r       Result
		verdict Verdict
		doubts  func(r *Result) []bool // all must be set
	}{
		{"all is well", good, Secure, func(r *Result) []bool {
			return []bool{!r.Tied, !r.Misfit, !r.Faint, !r.LoneLine, !r.Unseen, !r.FewLines, !r.LowConfidence}
		}},
		{"one line", with(func(r *Result) { r.LinesSeen, r.InEmission = 1, true }), Uncertain, func(r *Result) []bool { return []bool{r.LoneLine} }},
		{"one line in absorption, a large gap", with(func(r *Result) { r.LinesSeen = 1 }), Secure, func(r *Result) []bool { return []bool{r.LoneLine} }},
		{"one line in absorption", with(func(r *Result) { r.LinesSeen, r.Gap = 1, 50 }), Uncertain, func(r *Result) []bool { return []bool{r.LoneLine, r.FewLines, !r.LowConfidence} }},
		{"correlated pixels", with(func(r *Result) { r.Correlation, r.Gap = 3, 50 }), Uncertain, func(r *Result) []bool { return []bool{r.LowConfidence, !r.FewLines, !r.Tied} }},
		{"beyond description", with(func(r *Result) { r.Chi2Dof, r.Gap = 31, 1e6 }), Uncertain, func(r *Result) []bool { return []bool{r.Misfit} }},
		{"two lines, one on the night sky", with(func(r *Result) { r.LinesSeen, r.LinesOfAir, r.InEmission = 2, 1, true }), Uncertain, func(r *Result) []bool { return []bool{r.OnSky} }},
		{"three lines, one on the night sky", with(func(r *Result) { r.LinesSeen, r.LinesOfAir, r.InEmission = 3, 1, true }), Secure, func(r *Result) []bool { return []bool{!r.OnSky} }},
		{"lines seen, but as many missing", with(func(r *Result) { r.LinesMissing, r.InEmission = 4, true }), Uncertain, nil},
		{"lines seen, some missing", with(func(r *Result) { r.LinesMissing = 3 }), Uncertain, nil},
		{"lines that disagree", with(func(r *Result) { r.Scattered = true }), Uncertain, func(r *Result) []bool { return []bool{!r.FewLines, !r.LowConfidence} }},
		{"a quasar without emission", with(func(r *Result) { r.Class = "quasar" }), Uncertain, func(r *Result) []bool { return []bool{r.FewLines, !r.LowConfidence} }},
		{"a quasar with emission", with(func(r *Result) { r.Class, r.InEmission = "quasar", true }), Secure, nil},
		{"a family of emission lines without any", with(func(r *Result) { r.Class, r.Dark = "galaxy", true }), Uncertain, nil},
		{"a star of foreground gas", with(func(r *Result) { r.Class, r.Foreground = "star", true }), Uncertain, nil},
		{"two features, three left over", with(func(r *Result) { r.LinesSeen, r.Leftovers = 2, []float64{5000, 6000, 7000} }), Uncertain, func(r *Result) []bool { return []bool{r.Unexplained} }},
		{"five features, three left over", with(func(r *Result) { r.Leftovers = []float64{5000, 6000, 7000} }), Secure, func(r *Result) []bool { return []bool{r.Unexplained} }},
		{"two features, one left over", with(func(r *Result) { r.LinesSeen, r.Leftovers = 2, []float64{5000} }), Secure, func(r *Result) []bool { return []bool{!r.Unexplained} }},
		{"a rival that explains 89 %", with(func(r *Result) { r.Gap, r.Drop = 1100, 1e4 }), Uncertain, func(r *Result) []bool { return []bool{r.Tied} }},
		{"a rival that explains 87 %", with(func(r *Result) { r.Gap, r.Drop = 1300, 1e4 }), Secure, func(r *Result) []bool { return []bool{!r.Tied} }},
		{"a quasar on two lines, a rival that explains 81 %", with(func(r *Result) { r.Class, r.InEmission, r.LinesSeen, r.Gap, r.Drop = "quasar", true, 2, 1900, 1e4 }), Uncertain, func(r *Result) []bool { return []bool{r.Tied} }},
		{"a quasar on two lines, a rival that explains 79 %", with(func(r *Result) { r.Class, r.InEmission, r.LinesSeen, r.Gap, r.Drop = "quasar", true, 2, 2100, 1e4 }), Secure, func(r *Result) []bool { return []bool{!r.Tied} }},
		{"a quasar on three lines, a rival that explains 81 %", with(func(r *Result) { r.Class, r.InEmission, r.LinesSeen, r.Gap, r.Drop = "quasar", true, 3, 1900, 1e4 }), Secure, func(r *Result) []bool { return []bool{!r.Tied} }},
		{"weak lines missing", with(func(r *Result) { r.LinesMissing, r.WeakMissing = 1, true }), Uncertain, func(r *Result) []bool { return []bool{r.StrongMissing() == 0} }},
		{"a small gap", with(func(r *Result) { r.Gap = 8.9 }), Uncertain, func(r *Result) []bool { return []bool{r.Tied} }},
		{"a gap in a misfit", with(func(r *Result) { r.Chi2Dof = 8; r.Gap = 100 }), Uncertain, func(r *Result) []bool { return []bool{r.Misfit, !r.Tied} }},
		{"the end of the range", with(func(r *Result) { r.RangeEnd = true }), Uncertain, nil},
		{"no feature and no gap", with(func(r *Result) { r.LinesSeen = 0; r.Gap = 1; r.SNR = 0.5 }), None, func(r *Result) []bool { return []bool{r.Faint, r.Tied} }},
		{"no feature and no gap, bright", with(func(r *Result) { r.LinesSeen = 0; r.Gap = 1 }), None, func(r *Result) []bool { return []bool{!r.Faint} }},
		{"lines out of sight", with(func(r *Result) { r.LinesCovered = 2 }), Secure, func(r *Result) []bool { return []bool{r.Unseen} }},
		{"a galaxy without its continuum", with(func(r *Result) { r.Normalized, r.Class = true, "galaxy" }), Uncertain, func(r *Result) []bool { return []bool{r.Bare()} }},
		{"a quasar without its continuum", with(func(r *Result) { r.Normalized, r.Class = true, "quasar" }), Uncertain, func(r *Result) []bool { return []bool{r.Bare()} }},
		{"a star without its continuum", with(func(r *Result) { r.Normalized, r.Class = true, "star" }), Secure, func(r *Result) []bool { return []bool{!r.Bare()} }},
		{"a quasar with its continuum", with(func(r *Result) { r.Class, r.InEmission = "quasar", true }), Secure, func(r *Result) []bool { return []bool{!r.Bare()} }},
		{"a galaxy seen in part, by a model that does not fit", with(func(r *Result) { r.Class, r.LinesCovered, r.Chi2Dof, r.Gap = "galaxy", 2, 8, 1e4 }), Uncertain, func(r *Result) []bool { return []bool{r.Blind()} }},
		{"a star seen in part, by a model that does not fit", with(func(r *Result) { r.Class, r.LinesCovered, r.Chi2Dof, r.Gap = "star", 2, 8, 1e4 }), Secure, func(r *Result) []bool { return []bool{!r.Blind()} }},
		{"a galaxy seen whole, by a model that does not fit", with(func(r *Result) { r.Class, r.Chi2Dof, r.Gap = "galaxy", 8, 1e4 }), Secure, func(r *Result) []bool { return []bool{!r.Blind()} }},
		{"nothing expected", with(func(r *Result) { r.LinesExpected, r.LinesCovered = 0, 0 }), Secure, func(r *Result) []bool { return []bool{!r.Unseen} }},
		{"not found", Result{SNR: math.NaN(), Gap: math.NaN()}, None, func(r *Result) []bool { return []bool{!r.Faint, r.Confidence == 0, r.LowConfidence} }},
		{"no feature, a large gap", with(func(r *Result) { r.LinesSeen = 0 }), Uncertain, func(r *Result) []bool { return []bool{r.FewLines, !r.LowConfidence, !r.Faint} }},
		{"not found for want of pixels", Result{SNR: math.NaN(), Gap: math.NaN(), FewPixels: true}, None, func(r *Result) []bool { return []bool{!r.LowConfidence} }},
		{"not found and faint", Result{SNR: 0.2, Gap: math.NaN()}, None, func(r *Result) []bool { return []bool{r.Faint} }},
	} {
		r := c.r
		th.Judge(&r)
		if r.Verdict != c.verdict {
			t.Errorf("%s: verdict %v, want %v (confidence %.3f)", c.name, r.Verdict, c.verdict, r.Confidence)
		}
		if c.doubts == nil {
			continue
		}
		for i, ok := range c.doubts(&r) {
			if !ok {
				t.Errorf("%s: doubt %d is not as it should be: %+v", c.name, i, r)
			}
		}
	}
	if s := []string{None.String(), Uncertain.String(), Secure.String()}; s[0] != "none" || s[1] != "uncertain" || s[2] != "secure" {
		t.Errorf("verdicts are called %v", s)
	}
}

// A verdict other than secure has a doubt that tells why, whatever the thresholds; a secure
// one has none of those that deny it.
func TestNoVerdictWithoutDoubt(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		th := DefaultThresholds()
		if rapid.Bool().Draw(t, "other thresholds") {
			th.SecureLines = rapid.IntRange(1, 5).Draw(t, "secure lines")
			th.MisfitChi2 = rapid.Float64Range(1, 40).Draw(t, "misfit")
			th.HopelessChi2 = rapid.Float64Range(1, 40).Draw(t, "hopeless")
			th.TiedGap = rapid.Float64Range(0, 20).Draw(t, "tied")
		}
		flag := func(name string) bool { return rapid.IntRange(0, 3).Draw(t, name) == 0 }
		r := Result{Found: !flag("nothing found"), Class: rapid.SampledFrom([]string{"galaxy", "quasar", "star"}).Draw(t, "class"),
			Gap: rapid.Float64Range(0, 150).Draw(t, "gap"), Chi2Dof: rapid.Float64Range(0.5, 45).Draw(t, "chi2"), SNR: rapid.Float64Range(0, 20).Draw(t, "snr"),
			LinesSeen: rapid.IntRange(0, 6).Draw(t, "lines"), LinesExpected: 6, LinesCovered: rapid.IntRange(0, 6).Draw(t, "covered"), InEmission: !flag("no emission")}
		r.LinesOfAir = rapid.IntRange(0, r.LinesSeen).Draw(t, "lines of air")
		if flag("missing") {
			r.LinesMissing = 1
		}
		r.Drop, r.Dark, r.Foreground = r.Gap*rapid.Float64Range(1, 20).Draw(t, "drop over gap"), flag("dark"), flag("foreground")
		if flag("left over") {
			r.Leftovers = []float64{5000, 6000}
		}
		r.RangeEnd, r.Scattered, r.Normalized = flag("range end"), flag("scattered"), flag("normalized")
		th.Judge(&r)
		denying := r.FewPixels || r.FewLines || r.Tied || r.LowConfidence || r.RangeEnd || r.Scattered || r.LinesMissing > 0 || r.Bare() || r.Blind()
		switch {
		case r.Verdict == Secure && denying:
			t.Fatalf("secure with a doubt that denies it: %+v", r)
		case r.Verdict != Secure && !denying && !r.Misfit:
			t.Fatalf("%v without a doubt: %+v", r.Verdict, r)
		}
	})
}

// Confidence is one half without a gap and grows with it; a misfit stretches
// the gap that is needed.
func TestConfidenceGrowsWithGap(t *testing.T) {
	th := DefaultThresholds()
	confidence := func(gap, chi2 float64) float64 {
		r := Result{Found: true, Gap: gap, Chi2Dof: chi2}
		th.Judge(&r)
		return r.Confidence
	}
	if c := confidence(0, 1); c != 0.5 {
		t.Errorf("confidence %g without a gap", c)
	}
	for gap := 1.0; gap < 60; gap++ {
		if !(confidence(gap, 1) > confidence(gap-1, 1)) {
			t.Errorf("confidence does not grow at a gap of %g", gap)
		}
		if confidence(3*gap, 3) != confidence(gap, 1) || confidence(gap, 0.5) != confidence(gap, 1) {
			t.Errorf("a gap of %g counts otherwise than its ratio to a misfit above one", gap)
		}
	}
}

func TestCountFeatures(t *testing.T) {
	for _, c := range []struct {
		name  string
		lines []feature
		want  int
	}{
		{"none", nil, 0},
		{"one", []feature{{center: 100, sigma: 2, snr: 9}}, 1},
		{"the same line twice", []feature{{center: 100, sigma: 2, snr: 9}, {center: 100, sigma: 5, snr: 9}}, 1},
		{"apart, out of order", []feature{{center: 300, sigma: 2, snr: 9}, {center: 100, sigma: 2, snr: 9}, {center: 200, sigma: 2, snr: 9}}, 3},
		{"a blend", []feature{{center: 100, sigma: 2, snr: 9}, {center: 103.9, sigma: 2, snr: 9}}, 1},
		{"just apart", []feature{{center: 100, sigma: 2, snr: 9}, {center: 104.1, sigma: 2, snr: 9}}, 2},
		{"a doublet nearer than features are", []feature{{center: 100, sigma: 1, snr: 9}, {center: 103.5, sigma: 1, snr: 9}}, 1},
		{"a chain of blends", []feature{{center: 100, sigma: 2, snr: 9}, {center: 103, sigma: 2, snr: 9}, {center: 106, sigma: 2, snr: 9}}, 1},
	} {
		if got := countFeatures(c.lines, 3.9); got != c.want {
			t.Errorf("%s: %d, want %d", c.name, got, c.want)
		}
	}
}

// A weak line beside a broad one ten times as strong is left out, whichever comes first; one far
// away, or beside a narrow one, stays.
func TestLeaders(t *testing.T) {
	got := leaders([]feature{{center: 150, sigma: 20, snr: 5}, {center: 100, sigma: 20, snr: 50}, {center: 400, sigma: 20, snr: 5}, {center: 700, sigma: 2, snr: 50}, {center: 705, sigma: 2, snr: 5}}, 12, 200)
	want := []feature{{center: 100, sigma: 20, snr: 50}, {center: 700, sigma: 2, snr: 50}, {center: 400, sigma: 20, snr: 5}, {center: 705, sigma: 2, snr: 5}}
	if !slices.Equal(got, want) {
		t.Errorf("%v, want %v", got, want)
	}
}
