package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// trials of each cell. The standard error of a pull's standard deviation is
// 1/sqrt(2 trials) = 2.0 %, that of its mean 2.9 %, that of the share within
// one sigma 1.3 %. Seeds are fixed.
const trials = 1200

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

type outcome struct {
	fit, sum, fit2, sum2, offset, width moments
	ew, rel                             moments // measured and error over true
	lost                                int
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
	for range trials {
		noisy(&a, clean, rng)
		if k.contErr > 0 {
			d := k.contErr * rng.NormFloat64()
			a.Cont = make([]float64, len(a.Wave))
			for i := range a.Cont {
				a.Cont[i] = 1 + d
			}
		}
		res = m.Measure(res[:0], []Arm{a}, Options{}, &sc)
		r := res[0]
		if r.Kind != Emission && r.Kind != Absorption {
			out.lost++ // its equivalent width counts all the same
		}
		out.fit.add((r.EWRest + flux) / r.EWRestErr)
		out.sum.add((r.EWSum + flux) / r.EWSumErr)
		out.ew.add(-r.EWRest / flux)
		out.rel.add(r.EWRestErr / math.Abs(flux))
		if r.Kind != Limit && !math.IsNaN(r.OffsetErr) && !math.IsNaN(r.WidthErr) {
			out.offset.add((r.OffsetKms - shift) / r.OffsetErr)
			out.width.add((r.WidthKms - k.pixels*step) / r.WidthErr)
		}
		if k.apart > 0 {
			out.fit2.add((res[1].EWRest + flux/2) / res[1].EWRestErr)
			out.sum2.add((res[1].EWSum + flux/2) / res[1].EWSumErr)
		}
	}
	return out
}

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
	list = append(list,
		cell{sn: 10, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 3, peak: -0.6, contErr: 0.03},
		cell{sn: 50, pixels: 10, peak: 1, contErr: 0.03})
	kept := list[:0]
	for _, k := range list {
		if k.significance() >= 8 {
			kept = append(kept, k)
		}
	}
	return kept
}

// bounds are what the pulls of a line must keep: standard deviation, mean, and
// distance of the share within 1 from 0.683.
type bounds struct{ low, high, mean, share float64 }

// bounds returns the requirement for a line of that significance: 0.9 to 1.1,
// five standard errors away, a mean that allows for the bias of second order in
// noise/signal, and three and a half standard errors of the share. Below 10
// sigma the errors of a fit with free offset and width are no longer Gaussian:
// loose bounds. The mean over the posterior of two lines nearer than 2 sigma is
// drawn to the wide side of a skew distribution, as is its error.
func (k cell) bounds(significance float64) bounds {
	tight := k.apart > 0 && k.apart < 2
	switch {
	case significance < 10 && tight:
		return bounds{0.8, 1.6, 0.75, 0.2}
	case significance < 10:
		return bounds{0.9, 1.2, 0.2, 0.06}
	case tight:
		return bounds{0.87, 1.1, 0.28, 0.08}
	}
	return bounds{0.9, 1.1, 0.15, 0.046}
}

// checkPull fails when pulls have not mean 0, standard deviation 1 and a share
// of 68.3 % within 1, within the bounds.
func checkPull(t *testing.T, what string, m *moments, b bounds) {
	t.Helper()
	if sd := m.sd(); !(sd > b.low && sd < b.high) {
		t.Errorf("%s: pulls have a standard deviation of %.3f, want %.2f to %.2f", what, sd, b.low, b.high)
	}
	if v := m.mean(); !(math.Abs(v) < b.mean) {
		t.Errorf("%s: pulls have a mean of %.3f, want 0 +- %.2f", what, v, b.mean)
	}
	if s := m.inside / m.n; !(math.Abs(s-0.683) < b.share) {
		t.Errorf("%s: %.3f of the pulls lie within 1, want 0.683 +- %.3f", what, s, b.share)
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
			b := k.bounds(first)
			checkPull(t, "fit", &out.fit, b)
			checkPull(t, "sum", &out.sum, b)
			if k.apart > 0 {
				checkPull(t, "fit of the second", &out.fit2, k.bounds(first/2))
				checkPull(t, "sum of the second", &out.sum2, k.bounds(first/2))
			}
			if first >= 10 {
				if out.lost > trials/100 {
					t.Errorf("%d of %d lines not seen", out.lost, trials)
				}
				// What the mean may be off, in errors, with four standard
				// errors of the mean on top.
				tol := (b.mean + 4/math.Sqrt(trials)) * out.rel.mean()
				if r := out.ew.mean(); math.Abs(r-1) > tol {
					t.Errorf("mean of measured over true %.4f, want 1 +- %.4f", r, tol)
				}
				inside += out.fit.inside
				n += out.fit.n
			}
			t.Logf("S/N %.0f: fit %.3f +- %.3f, sum %.3f +- %.3f", first, out.fit.mean(), out.fit.sd(), out.sum.mean(), out.sum.sd())
		})
	}
	if s := inside / n; !(s > 0.65 && s < 0.71) {
		t.Errorf("%.4f of all pulls lie within 1, want 0.65 to 0.71", s)
	} else {
		t.Logf("%.4f of all %.0f pulls lie within 1", s, n)
	}
}
