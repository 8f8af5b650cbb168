package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// trials returns how many spectra each cell gets: 1,200, twenty times as many with
// DUSKLINE_LONG=1. Of three, two have noise of their own: these 800 give pulls
// their standard deviation, with a standard error of 1/sqrt(1600) = 2.5 %, and the
// share within one sigma, with 1.6 %. The third has the noise of the first with
// opposite sign (antithetic variates, Hammersley & Morton 1956): what is linear
// in the noise cancels in the mean of such a pair, and the 400 pairs
// show a bias 5 to 30 times smaller than independent spectra do. Seeds are fixed.
func trials() int {
	if long() {
		return 24000
	}
	return 1200
}

// long reports whether all cells are wanted, with many spectra each.
func long() bool { return os.Getenv("DUSKLINE_LONG") == "1" }

const pair = `
[[line]]
name = "A"
ion = "X I"
wave = 5000.0
group = "AB"
seen = "both"
source = "invented"
[[line]]
name = "B"
ion = "%s"
wave = %.6f
group = "AB"
seen = "both"
source = "invented"
`

// cell is one set of Monte Carlo conditions: a line of the given peak (against
// a continuum of 1, negative in absorption) and sigma in pixels of 20 km/s, with
// noise 1/sn, and, if apart > 0, a second that many sigma on, of half the peak or of ratio
// times it.
type cell struct {
	sn, pixels, peak, apart float64
	sameIon                 bool
	contErr                 float64 // standard deviation of an offset of the continuum given
	ratio                   float64 // of the second peak to the first, 0: a half
}

func (k cell) String() string {
	s := fmt.Sprintf("sn%g_px%g_peak%.2g", k.sn, k.pixels, k.peak)
	if k.apart > 0 {
		s += fmt.Sprintf("_apart%g_same%v", k.apart, k.sameIon)
	}
	if k.ratio > 0 {
		s += fmt.Sprintf("_ratio%.2g", k.ratio)
	}
	if k.contErr > 0 {
		s += fmt.Sprintf("_cont%g", k.contErr)
	}
	return s
}

// second is the flux of the second line over that of the first.
func (k cell) second() float64 {
	if k.ratio > 0 {
		return k.ratio
	}
	return 0.5
}

// significance is the S/N to expect by the formula of Cayrel (1988), with 1.5
// as derived for a fit of three parameters.
func (k cell) significance() float64 {
	w := math.Abs(k.peak) * math.Sqrt(2*math.Pi) * k.pixels
	return w * k.sn / (1.503 * math.Sqrt(fwhmPerSigma*k.pixels))
}

// outcome gathers the pulls of what is reported of the first line: itself, or the
// sum where both lines are one; and of the second where it is reported.
type outcome struct {
	fit, sum, fit2, sum2, offset, width moments
	rel                                 moments // error over true
	// bias has the mean of both deviations of a pair of spectra, of the fit and of the sum.
	bias, biasSum deviation
	joint         float64 // spectra in which the sum is reported
	lost          int
}

// deviation is measured minus true, in units of the stated error and of the true value.
type deviation struct{ pull, value moments }

func (d *deviation) add(first, second, firstErr, secondErr float64) {
	d.pull.add(0.5 * (first/firstErr + second/secondErr))
	d.value.add(0.5 * (first + second))
}

// bias returns what is certainly wrong, by three standard errors, in units of the mean
// relative error rel. An error that is right for every truth goes with the value, since it depends
// on what the value is computed from: by b times its relative deviation, the mean of the
// pulls and the mean of the values differ by b rel in these units, and cannot both
// vanish. What counts is the nearer one, and nothing where zero lies between them.
func (d *deviation) bias(rel float64) float64 {
	x, y := d.pull.mean(), d.value.mean()/rel
	dx, dy := 3*d.pull.sd()/math.Sqrt(d.pull.n), 3*d.value.sd()/math.Sqrt(d.value.n)/rel
	if x*y <= 0 {
		return 0
	}
	return max(0, min(math.Abs(x)-dx, math.Abs(y)-dy))
}

func (k cell) run(t *testing.T, seed uint64) outcome {
	const step = 20.0
	const shift = 13.0
	sigma := k.pixels * step * 5000 / c
	flux := k.peak * math.Sqrt(2*math.Pi) * sigma
	truth := []profileTruth{{5000 * (1 + shift/c), sigma, flux}}
	m := parse(t, oneLine)
	if k.apart > 0 {
		wave := 5000 * (1 + k.apart*k.pixels*step/c)
		ion := "Y I"
		if k.sameIon {
			ion = "X I"
		}
		m = parse(t, fmt.Sprintf(pair, ion, wave))
		truth = append(truth, profileTruth{wave * (1 + shift/c), sigma * wave / 5000, k.second() * flux})
	}
	clean := newArm(grid(5000, step, 1201), 1, 1/k.sn, truth...)
	rng := rand.New(rand.NewPCG(seed, 20310314))
	var a Arm
	var sc Scratch
	var out outcome
	var res []Result
	var before Result
	d := 0.0
	for i := range trials() {
		mirrored := i%3 == 1
		if !mirrored {
			noisy(&a, clean, rng)
			d = k.contErr * rng.NormFloat64()
		} else {
			for j, f := range a.Flux {
				a.Flux[j] = 2*clean.Flux[j] - f
			}
			d = -d
		}
		if k.contErr > 0 {
			a.Cont = make([]float64, len(a.Wave))
			for i := range a.Cont {
				a.Cont[i] = 1 + d
			}
		}
		res = m.Measure(res[:0], []Arm{a}, Options{}, &sc)
		r, w, joint := res[0], -flux, false
		if k.apart > 0 && (r.Reason == ReasonBlended || res[1].Reason == ReasonBlended) {
			w, joint = -(1+k.second())*flux, true
			if r.Reason == ReasonBlended {
				r = res[1]
			}
			if r.Blend != "A+B" {
				t.Fatalf("a sum of %q", r.Blend)
			}
		}
		// In units of the true value, which is positive then.
		for _, v := range [4]*float64{&r.EWRest, &r.EWRestErr, &r.EWSum, &r.EWSumErr} {
			*v /= math.Abs(w)
		}
		r.EWRest, r.EWSum = sign1(flux)*r.EWRest-1, sign1(flux)*r.EWSum-1
		if mirrored {
			out.bias.add(before.EWRest, r.EWRest, before.EWRestErr, r.EWRestErr)
			out.biasSum.add(before.EWSum, r.EWSum, before.EWSumErr, r.EWSumErr)
			continue
		}
		before = r
		if r.Kind != Emission && r.Kind != Absorption {
			out.lost++ // its equivalent width counts all the same
		}
		out.fit.add(r.EWRest / r.EWRestErr)
		out.sum.add(r.EWSum / r.EWSumErr)
		out.rel.add(r.EWRestErr)
		if r.Kind != Limit && !math.IsNaN(r.OffsetErr) && !math.IsNaN(r.WidthErr) {
			out.offset.add((r.OffsetKms - shift) / r.OffsetErr)
			out.width.add((r.WidthKms - k.pixels*step) / r.WidthErr)
		}
		if joint {
			out.joint++
		} else if k.apart > 0 {
			out.fit2.add((res[1].EWRest + k.second()*flux) / res[1].EWRestErr)
			out.sum2.add((res[1].EWSum + k.second()*flux) / res[1].EWSumErr)
		}
	}
	return out
}

const (
	leastSignificance = 8
	leastSecond       = 4 // below, the question is whether the second line is seen
)

// grid of the simulation: cells in which the stronger line is significant (8 sigma by
// Cayrel's formula), since below that the question is whether it is seen at all.
func cells() []cell {
	var list []cell
	for _, pixels := range []float64{1, 2, 5, 12, 30} {
		for _, peak := range []float64{-0.5, 0.8, 5} {
			for _, sn := range []float64{3, 10, 30, 100} {
				list = append(list, cell{sn: sn, pixels: pixels, peak: peak})
			}
		}
	}
	for _, pixels := range []float64{2, 8} {
		for _, peak := range []float64{-0.6, 2} {
			for _, sn := range []float64{10, 50} {
				for _, apart := range []float64{1.8, 3} {
					for _, same := range []bool{false, true} {
						list = append(list, cell{sn: sn, pixels: pixels, peak: peak, apart: apart, sameIon: same})
					}
				}
			}
		}
	}
	if long() {
		for _, pixels := range []float64{2, 8} {
			for _, peak := range []float64{-0.6, 2} {
				for _, sn := range []float64{10, 20} {
					for _, apart := range []float64{1.5, 2.2, 2.6} {
						list = append(list, cell{sn: sn, pixels: pixels, peak: peak, apart: apart, sameIon: pixels == 2})
					}
				}
			}
		}
	}
	for _, ratio := range []float64{1, 1. / 3, 3, 0.1} {
		for _, apart := range []float64{1.5, 1.8, 2.2, 2.6} {
			for _, sn := range []float64{10, 20, 50} {
				if long() || sn == 20 {
					list = append(list, cell{sn: sn, pixels: 4, peak: -0.6 / max(1, ratio), apart: apart, sameIon: true, ratio: ratio})
				}
			}
		}
	}
	list = append(list,
		cell{sn: 10, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 10, peak: 1, contErr: 0.03})
	kept := list[:0]
	for _, k := range list {
		if k.significance()*max(1, k.ratio) >= leastSignificance {
			kept = append(kept, k)
		}
	}
	return kept
}

// bounds are what the pulls of a line must keep: standard deviation, mean, and
// share within 1.
type bounds struct{ low, high, mean, least, most float64 }

// around returns bounds with a share that may differ from 0.683 by so much.
func around(low, high, mean, share float64) bounds {
	return bounds{low, high, mean, 0.683 - share, 0.683 + share}
}

const (
	// mostJoint is the part of the spectra in which the sum of two lines may be reported for
	// the second line's pulls to be judged: the rest is a selection by noise.
	mostJoint = 0.35
	// Cells in which the sum is reported in more than leastMixed and less than mostMixed
	// of the spectra are mixed: noise decides, and goes with what is measured.
	leastMixed, mostMixed = 0.02, 0.98
)

// mixed reports whether noise decides what is reported.
func (o *outcome) mixed() bool {
	share := o.joint / o.fit.n
	return share > leastMixed && share < mostMixed
}

// fold reports whether two lines are so close, and told apart, that what each has is
// read from the skewness of both, which is largest at 3.7 to 1 and falls beyond: the likelihood
// has a long tail to that side.
func (k cell) fold(significance float64) bool {
	return k.apart > 0 && k.apart < 1.6 && significance < 100
}

// bounds returns the requirement on n pulls: a standard deviation of 0.95 to
// 1.05 and a share within 1 of 0.65 to 0.71, each with four of its standard errors, and a mean of
// 0.05, 0.3 for what is less than 10 sigma and for crowded lines; checkBias looks closer. Where
// noise decides what is reported 1.1 and 0.73 are allowed (1.07 and 0.698 are measured), for other
// ratios than 2 to 1 0.87 to 1.1 and 0.63 to 0.75 (0.88 to 1.08, 0.634 to 0.745), and 0.74 in
// a fold (0.728); a line below 8 sigma, the limit of the cells, has loose bounds.
func (k cell) bounds(significance float64, out *outcome, n float64) bounds {
	if significance < leastSignificance {
		return around(0.9, 1.2, 0.3, 0.06)
	}
	sd, share, mean := 4/math.Sqrt(2*n), 4*math.Sqrt(0.683*0.317/n), 0.05
	low, high, least, most := 0.95, 1.05, 0.65, 0.71
	if significance < 10 || k.apart > 0 && k.apart < crowdedWithin {
		mean = 0.3
	}
	if out.mixed() {
		high, most = 1.1, 0.73
		if k.ratio > 0 {
			low, least, most = 0.87, 0.63, 0.75
		}
	}
	if k.fold(significance) {
		most = 0.74
	}
	return bounds{low - sd, high + sd, mean + 4/math.Sqrt(n), least - share, most + share}
}

// checkPull fails when pulls have not mean 0, standard deviation 1 and a share
// of 68.3 % within 1, within the bounds.
func checkPull(t *testing.T, what string, m *moments, b bounds) {
	t.Helper()
	if sd := m.sd(); !(sd > b.low && sd < b.high) {
		t.Errorf("%s: pulls have a standard deviation of %.3f, want %.3f to %.3f", what, sd, b.low, b.high)
	}
	if v := m.mean(); !(math.Abs(v) < b.mean) {
		t.Errorf("%s: pulls have a mean of %.3f, want 0 +- %.3f", what, v, b.mean)
	}
	if s := m.inside / m.n; !(s > b.least && s < b.most) {
		t.Errorf("%s: %.3f of the pulls lie within 1, want %.3f to %.3f", what, s, b.least, b.most)
	}
}

// Errors must be as large as the scatter, and values right in the mean.
func TestPulls(t *testing.T) {
	if testing.Short() {
		t.Skip("simulation of some seconds")
	}
	var inside, n float64
	for i, k := range cells() {
		t.Run(k.String(), func(t *testing.T) {
			out := k.run(t, uint64(i))
			first := k.significance()
			strong := first * max(1, k.ratio)
			share := out.joint / out.fit.n
			if share > mostMixed {
				first = strong // of the sum
			}
			if first >= leastSignificance || !out.mixed() {
				b := k.bounds(first, &out, out.fit.n)
				checkPull(t, "fit", &out.fit, b)
				checkPull(t, "sum", &out.sum, b)
			}
			// Where the sum is reported so often, the others are a selection.
			if second := k.significance() * k.second(); k.apart > 0 && share < mostJoint && second >= leastSecond {
				b := k.bounds(second, &out, out.fit2.n)
				checkPull(t, "fit of the second", &out.fit2, b)
				checkPull(t, "sum of the second", &out.sum2, b)
			}
			if strong >= 10 {
				if k.ratio == 0 && out.lost > trials()/100 {
					t.Errorf("%d of %d lines not seen", out.lost, trials())
				}
				inside += out.fit.inside
				n += out.fit.n
			}
			if first >= leastSignificance {
				k.checkBias(t, first, &out)
			}
			x, y := &out.bias, &out.biasSum
			t.Logf("S/N %.0f, error %.2f %%: fit %+.3f +- %.3f, %.1f %% within, sum %+.3f +- %.3f, %.1f %% within; second %+.3f +- %.3f, %.1f %% within; sum of both %.3f; bias of the fit %+.4f of its error, %+.2f %% of the value; of the sum %+.4f, %+.2f %%",
				first, 100*out.rel.mean(), out.fit.mean(), out.fit.sd(), 100*out.fit.inside/out.fit.n, out.sum.mean(), out.sum.sd(), 100*out.sum.inside/out.sum.n,
				out.fit2.mean(), out.fit2.sd(), 100*out.fit2.inside/out.fit2.n, share, x.pull.mean(), 100*x.value.mean(), y.pull.mean(), 100*y.value.mean())
		})
	}
	if s := inside / n; !(s > 0.65 && s < 0.71) {
		t.Errorf("%.4f of all pulls lie within 1, want 0.65 to 0.71", s)
	} else {
		t.Logf("%.4f of all %.0f pulls lie within 1", s, n)
	}
}

// checkBias fails when the bias is certainly above both 2 % of the error and 0.5 % of the
// value. More is allowed where theory says that it cannot be less (docs/lines.md):
// where noise decides whether sum or single line is reported 0.25 of the error (0.19
// is measured), in a fold 0.15 (0.09), and of the sum of two lines whose ratio is not about
// the 2 to 1 or 3 to 1 that a flat share has in the mean 1.2 % of the value (0.54).
func (k cell) checkBias(t *testing.T, significance float64, out *outcome) {
	t.Helper()
	rel := out.rel.mean()
	ofError, ofValue := 0.02, 0.005
	switch {
	case out.mixed():
		ofError = 0.25
	case k.fold(significance) && out.joint < 0.5*out.fit.n:
		ofError = 0.15
	case k.ratio > 0 && out.joint > 0.5*out.fit.n:
		ofValue = 0.012
	}
	for _, p := range []struct {
		what string
		d    *deviation
	}{{"fit", &out.bias}, {"sum", &out.biasSum}} {
		if b := p.d.bias(rel); b > ofError && b*rel > ofValue {
			t.Errorf("%s: biased by more than %.3f of its error, %.2f %% of the value", p.what, b, 100*b*rel)
		}
	}
}

// sign1 is the sign of the equivalent width of a flux.
func sign1(x float64) float64 {
	if x > 0 {
		return -1
	}
	return 1
}
