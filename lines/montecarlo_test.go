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
// noise 1/sn, and, if apart > 0, a second of half the peak that many sigma on.
type cell struct {
	sn, pixels, peak, apart float64
	sameIon                 bool
	contErr                 float64 // standard deviation of an offset of the continuum given
}

func (k cell) String() string {
	s := fmt.Sprintf("sn%g_px%g_peak%g", k.sn, k.pixels, k.peak)
	if k.apart > 0 {
		s += fmt.Sprintf("_apart%g_same%v", k.apart, k.sameIon)
	}
	if k.contErr > 0 {
		s += fmt.Sprintf("_cont%g", k.contErr)
	}
	return s
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
	ew, rel                             moments // measured and error over true
	// pair has the mean of both deviations of a pair in units of the stated
	// error, of the fit and of the sum.
	pair, pairSum moments
	joint         float64 // spectra in which the sum is reported
	lost          int
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
		truth = append(truth, profileTruth{wave * (1 + shift/c), sigma * wave / 5000, flux / 2})
	}
	clean := newArm(grid(5000, step, 1201), 1, 1/k.sn, truth...)
	rng := rand.New(rand.NewPCG(seed, 20310314))
	var a Arm
	var sc Scratch
	var out outcome
	var res []Result
	var first, firstSum float64
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
			w, joint = -1.5*flux, true
			if r.Reason == ReasonBlended {
				r = res[1]
			}
			if r.Blend != "A+B" {
				t.Fatalf("a sum of %q", r.Blend)
			}
		}
		dev, devSum := (r.EWRest-w)/r.EWRestErr, (r.EWSum-w)/r.EWSumErr
		if mirrored {
			out.pair.add(0.5 * (first + dev))
			out.pairSum.add(0.5 * (firstSum + devSum))
			continue
		}
		first, firstSum = dev, devSum
		if r.Kind != Emission && r.Kind != Absorption {
			out.lost++ // its equivalent width counts all the same
		}
		out.fit.add(dev)
		out.sum.add(devSum)
		out.ew.add(r.EWRest / w)
		out.rel.add(r.EWRestErr / math.Abs(w))
		if r.Kind != Limit && !math.IsNaN(r.OffsetErr) && !math.IsNaN(r.WidthErr) {
			out.offset.add((r.OffsetKms - shift) / r.OffsetErr)
			out.width.add((r.WidthKms - k.pixels*step) / r.WidthErr)
		}
		if joint {
			out.joint++
		} else if k.apart > 0 {
			out.fit2.add((res[1].EWRest + flux/2) / res[1].EWRestErr)
			out.sum2.add((res[1].EWSum + flux/2) / res[1].EWSumErr)
		}
	}
	return out
}

const leastSignificance = 8

// grid of the simulation: cells in which the line is significant (8 sigma by
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
	list = append(list,
		cell{sn: 10, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 10, peak: 1, contErr: 0.03})
	kept := list[:0]
	for _, k := range list {
		if k.significance() >= leastSignificance {
			kept = append(kept, k)
		}
	}
	return kept
}

// bounds are what the pulls of a line must keep: standard deviation, mean, and
// share within 1.
type bounds struct{ low, high, mean, least, most float64 }

// crowded reports whether a mean over the posterior is reported of two lines.
func (k cell) crowded() bool { return k.apart > 0 && k.apart < crowdedWithin }

// skew reports whether the bias of that is to be expected: below 50 sigma at 1.8 sigma of
// distance. The error of what the one line has goes with the third power of the distance.
func (k cell) skew(significance float64) bool {
	return k.crowded() && significance*math.Pow(k.apart/1.8, 3) < 50
}

// around returns bounds with a share that may differ from 0.683 by so much.
func around(low, high, mean, share float64) bounds {
	return bounds{low, high, mean, 0.683 - share, 0.683 + share}
}

// mostJoint is the part of the spectra in which the sum of two lines may be reported for
// the second line's pulls to be judged: the rest is a selection by noise.
const mostJoint = 0.35

// bounds returns the requirement on n pulls: a standard deviation of 0.95 to
// 1.05 and a share within 1 of 0.65 to 0.71, each with four of its standard errors, a mean of
// 0.05 (checkBias looks closer), and 0.3 for what is less than 10 sigma and for crowded
// lines: the mean over the posterior of two amplitudes of one sign is drawn
// to the wide side of a skew distribution. A second line below 8 sigma, the limit of the
// cells, has loose bounds; the sum of two lines nearer than 1.8 sigma and below 10 sigma is
// allowed a standard deviation of 1.1: 1.09 is measured.
func (k cell) bounds(significance, n float64) bounds {
	if significance < leastSignificance {
		return around(0.9, 1.2, 0.2, 0.06)
	}
	sd, share, mean, high := 4/math.Sqrt(2*n), 4*math.Sqrt(0.683*0.317/n), 0.05, 1.05
	if significance < 10 || k.skew(significance) {
		mean = 0.3
	}
	if significance < 10 && k.apart > 0 && k.apart < 1.8 {
		high = 1.1
	}
	return bounds{0.95 - sd, high + sd, mean + 4/math.Sqrt(n), 0.65 - share, 0.71 + share}
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
			b := k.bounds(first, out.fit.n)
			checkPull(t, "fit", &out.fit, b)
			checkPull(t, "sum", &out.sum, b)
			// Where the sum is reported so often, the others are a selection.
			share := out.joint / out.fit.n
			if k.apart > 0 && share < mostJoint {
				b := k.bounds(first/2, out.fit2.n)
				checkPull(t, "fit of the second", &out.fit2, b)
				checkPull(t, "sum of the second", &out.sum2, b)
			}
			if first >= 10 {
				if out.lost > trials()/100 {
					t.Errorf("%d of %d lines not seen", out.lost, trials())
				}
				// What the mean may be off: where the error goes with the value, the
				// pulls of crowded lines have another mean than the values.
				tol := b.mean * out.rel.mean()
				if k.crowded() {
					off := 0.28
					if k.apart < 1.8 {
						off = 0.35 // 0.32 is measured at 60 sigma
					}
					tol = (off + 4/math.Sqrt(out.ew.n)) * out.rel.mean()
				}
				if r := out.ew.mean(); math.Abs(r-1) > tol {
					t.Errorf("mean of measured over true %.4f, want 1 +- %.4f", r, tol)
				}
				inside += out.fit.inside
				n += out.fit.n
			}
			k.checkBias(t, first, &out)
			bias, biasErr := out.pair.mean(), out.pair.sd()/math.Sqrt(out.pair.n)
			t.Logf("S/N %.0f: fit %.3f +- %.3f, %.3f within, sum %.3f +- %.3f, %.3f within; second %.3f +- %.3f, %.3f within; sum of both %.2f; bias of the fit %+.4f +- %.4f of its error, %+.2f %% of the value; of the sum %+.4f +- %.4f", first,
				out.fit.mean(), out.fit.sd(), out.fit.inside/out.fit.n, out.sum.mean(), out.sum.sd(), out.sum.inside/out.sum.n,
				out.fit2.mean(), out.fit2.sd(), out.fit2.inside/out.fit2.n, share, bias, biasErr, 100*bias*out.rel.mean()*sign1(k.peak),
				out.pairSum.mean(), out.pairSum.sd()/math.Sqrt(out.pairSum.n))
		})
	}
	if s := inside / n; !(s > 0.65 && s < 0.71) {
		t.Errorf("%.4f of all pulls lie within 1, want 0.65 to 0.71", s)
	} else {
		t.Logf("%.4f of all %.0f pulls lie within 1", s, n)
	}
}

// checkBias fails when the bias of a line of 10 sigma and more is certainly, by
// three standard errors, above both 2 % of its error and 0.5 % of its value. Members
// of pairs that skew tells of are only logged: their bias is that of
// the posterior mean of two amplitudes that have one sign.
func (k cell) checkBias(t *testing.T, significance float64, out *outcome) {
	t.Helper()
	if significance < 10 || k.skew(significance) {
		return
	}
	rel := out.rel.mean()
	for _, p := range []struct {
		what string
		m    *moments
	}{{"fit", &out.pair}, {"sum", &out.pairSum}} {
		bias, err := p.m.mean(), p.m.sd()/math.Sqrt(p.m.n)
		if b := math.Abs(bias) - 3*err; b > 0.02 && b*rel > 0.005 {
			t.Errorf("%s: biased by %.3f +- %.3f of its error, %.2f %% of the value", p.what, bias, err, 100*bias*rel)
		}
	}
}

// sign1 is the sign of an equivalent width.
func sign1(x float64) float64 {
	if x > 0 {
		return -1
	}
	return 1
}
