package absorbers

import (
	"math"
	"math/rand/v2"
	"testing"
)

// fine returns a flat, noiseless spectrum from 8000 Angstrom in pixels of 10 km/s with
// Mg II doublets at z, offsets in km/s, and rest equivalent widths of the stronger
// line; the weaker has ratio times that.
func fine(z, sigma float64, parts ...[3]float64) Arm {
	var a Arm
	for i := range 5000 {
		w := 8000 * math.Exp(float64(i)*10/c)
		f := 1.0
		for _, p := range parts {
			for k, rest := range []float64{2796.3522, 2803.5310} {
				x := p[1]
				if k == 1 {
					x *= p[2]
				}
				v := c*math.Log(w/rest/(1+z)) - p[0]
				f *= math.Exp(-x * c / rest / (math.Sqrt(2*math.Pi) * sigma) * math.Exp(-0.5*v*v/(sigma*sigma)))
			}
		}
		a.Wave, a.Flux, a.Ivar = append(a.Wave, w), append(a.Flux, f), append(a.Ivar, 400)
	}
	return a
}

func fineWidth(a Arm, z float64) (w float64) {
	for i := range a.Wave {
		if math.Abs(c*math.Log(a.Wave[i]/2796.3522/(1+z))) < 384 {
			w += (1 - a.Flux[i]) * a.Wave[i] * 10 / c / (1 + z)
		}
	}
	return w
}

// Components 180 km/s apart, with clear light between, are one system with the
// equivalent width of both; 520 km/s apart they are two.
func TestLinkedComponents(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(41, 7))
	const z = 2.0
	near := fine(z, 22, [3]float64{-90, 0.35, 0.6}, [3]float64{90, 0.35, 0.6})
	far := fine(z, 22, [3]float64{-260, 0.35, 0.6}, [3]float64{260, 0.35, 0.6})
	want := fineWidth(near, z)
	var pulls tally
	for range 40 {
		got := f.Find(nil, []Arm{noisyCopy(near, r)}, Options{Z: 2.4}, nil)
		if len(got) != 1 {
			t.Errorf("180 km/s apart: %d systems", len(got))
			continue
		}
		pulls.add(got[0].EW-want, got[0].EWErr)
		if dv := c * (got[0].Z - z) / (1 + z); math.Abs(dv) > 20 {
			t.Errorf("%.0f km/s off the middle", dv)
		}
		if got := f.Find(nil, []Arm{noisyCopy(far, r)}, Options{Z: 2.4}, nil); len(got) != 2 {
			t.Errorf("520 km/s apart: %d systems", len(got))
		}
	}
	// 40 draws: standard error of the mean pull 0.16.
	if m := pulls.pull / pulls.found; math.Abs(m) > 0.5 || pulls.pullSD() > 1.4 {
		t.Errorf("pulls of W %.2f +- %.2f", m, pulls.pullSD())
	}
}

// Shallow lines of something else at the end of the stronger line, too faint to be
// seen in single pixels, hardly enter the sum.
func TestShallowNeighbor(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(42, 7))
	const z = 2.0
	pair := [3]float64{0, 0.8, 0.75}
	alone := fine(z, 40, pair)
	beside := fine(z, 40, pair, [3]float64{140, 0.12, 0}, [3]float64{200, 0.12, 0}, [3]float64{260, 0.12, 0})
	want, other := fineWidth(alone, z), fineWidth(beside, z)
	sum := 0.0
	for range 40 {
		for _, s := range f.Find(nil, []Arm{noisyCopy(beside, r)}, Options{Z: 2.4}, nil) {
			if s.Kind == MgII && math.Abs(s.Z-z)*c/(1+z) < 60 {
				sum += s.EW / 40
			}
		}
	}
	t.Logf("W %.3f; %.3f alone, %.3f with the neighbor", sum, want, other)
	// A range that is not drawn back lets 0.085 in; the standard error is 0.005.
	if sum > want+0.07 || sum < want-0.02 {
		t.Errorf("W = %.3f, %.3f alone, %.3f with the neighbor", sum, want, other)
	}
}

// Errors that are too small on sky lines only, there by a factor of three, leave the
// weights between them as stated.
func TestSkyLinesApart(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(43, 7))
	a := noisyCopy(fine(2.0, 40), r)
	for i := range a.Flux {
		if i%16 < 4 {
			a.Ivar[i] /= 4
			a.Flux[i] += 3 / math.Sqrt(a.Ivar[i]) * r.NormFloat64()
		}
	}
	var sc Scratch
	f.Find(nil, []Arm{a}, Options{Z: 2.4}, &sc)
	var on, off []float64
	for i := range sc.track.weight {
		if q := sc.track.weight[i] / a.Ivar[i]; i%16 < 4 {
			on = append(on, q)
		} else {
			off = append(off, q)
		}
	}
	mean := func(v []float64) (m float64) {
		for _, x := range v {
			m += x / float64(len(v))
		}
		return m
	}
	// 1/(1 + 9) of the stated weight remains; the median of the second
	// differences has neighbors of smaller errors, so that a little less is found.
	t.Logf("weights %.2f of those stated on sky lines, %.2f between", mean(on), mean(off))
	if m := mean(on); m < 0.05 || m > 0.25 {
		t.Errorf("weights on sky lines %.2f of those stated", m)
	}
	if m := mean(off); m < 0.9 {
		t.Errorf("weights between sky lines %.2f of those stated", m)
	}
}
