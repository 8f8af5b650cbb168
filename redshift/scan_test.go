package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"duskline/continuum"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// noisyLevel is a bare level of noise and uneven weights.
func noisyLevel(r *rand.Rand, n int) *level {
	l := bareLevel(n)
	for i := range n {
		l.resid[i] = r.NormFloat64()
		l.weight[i] = math.Exp(0.5 * r.NormFloat64())
		l.cont[i] = 1 + r.Float64()
		if r.IntN(20) == 0 {
			l.weight[i] = 0
		}
	}
	return l
}

func everything() *[ladderSize]float64 {
	var s [ladderSize]float64
	for i := range s {
		s[i] = 1
	}
	return &s
}

func TestRung(t *testing.T) {
	for k := range ladderSize {
		for _, f := range []float64{1, 1.13, 1 / 1.13} {
			if got := rung(f * rungSigma(k)); got != k {
				t.Errorf("%g times the width of rung %d is on rung %d", f, k, got)
			}
		}
	}
	if rung(1e-3) != 0 || rung(1e6) != ladderSize-1 {
		t.Error("widths off the ladder are not on its ends")
	}
	if s := rungSigma(ladderSize - 1); math.Abs(s-112) > 1 {
		t.Errorf("the last rung is %.1f pixels, its comment says 112", s)
	}
}

// The drop at every lag is that of direct sums with a width on the ladder and
// positions on pixels: num^2/den with num = sum w r T, den = sum w T^2 of each
// component's template. The norm is
// lowered by what survives the spline.
func TestNominateAgainstDirectSums(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 5))
		const n = 700
		l := noisyLevel(r, n)
		// Even distances, so that the middle of two lines is a pixel as well.
		type line struct {
			pixel int
			amp   float64
		}
		var lines [][]line
		f := &Family{ZMin: math.Pow(10, -90.5*testStep) - 1, ZMax: math.Pow(10, 90.5*testStep) - 1}
		var widths []float64
		for c := range 2 {
			k := rapid.IntRange(0, binFrom-1).Draw(t, "rung")
			widths = append(widths, rungSigma(k))
			comp := component{absorption: c == 1, scale: 1, width: rungSigma(k) * kmsPixel}
			var set []line
			for range rapid.IntRange(1, 4).Draw(t, "lines") {
				// Inside at all lags: the cross terms of a line that leaves the
				// spectrum are another matter.
				p := line{150 + 2*r.IntN(200), 0.3 + r.Float64()}
				set = append(set, p)
				comp.terms = append(comp.terms, term{logWave: logWaveAt(l, float64(p.pixel)), amp: p.amp})
			}
			lines = append(lines, set)
			f.components = append(f.components, comp)
		}
		var s scanner
		s.resp.reset(l)
		surv := everything()
		for k := range surv {
			surv[k] = 0.1 + 0.9*r.Float64()
		}
		found := s.nominate(nil, l, f, 0, surv, 5, 6)
		const kmin = -90
		if len(s.drop) != 181 {
			t.Fatalf("%d lags, want -90 to 90", len(s.drop))
		}
		for i, got := range s.drop {
			want, room := 0.0, 0.0
			for c, set := range lines {
				num, den, scale := 0.0, 0.0, 0.0
				for p := range n {
					v := 0.0
					for _, q := range set {
						u := float64(p-q.pixel-kmin-i) / widths[c]
						v += q.amp * math.Exp(-0.5*u*u)
					}
					if c == 1 {
						v *= -l.cont[p]
					}
					num += l.weight[p] * v * l.resid[p]
					den += l.weight[p] * v * v
				}
				den *= surv[rung(widths[c])]
				// The filter of the sum reaches 3.5 sigma, that of the norm as
				// far in its own, narrower, width: tails of exp(-6.1) of a
				// peak are left out, in the sum what noise makes of them,
				// exp(-6.1) sqrt(norm) times four. Cross terms below 2 % of
				// two lines are left out too, and weights between the lines
				// may be some times those on them: 10 % of the norm.
				scale = 4 * 0.0022 * math.Sqrt(den)
				if num > -scale {
					want += math.Pow(max(0, num), 2) / den
					room += 2*math.Abs(num)*scale/den + scale*scale/den + 0.1*num*num/den
				}
			}
			if math.Abs(got-want) > room+1e-9 {
				t.Fatalf("lag %d: drop %.6f, direct sums say %.6f within %.6f", i+kmin, got, want, room)
			}
		}
		checkNominees(t, &s, found, kmin, 5, 6)
	})
}

// checkNominees holds the nominees against the drop they come from: local
// maxima in order, apart, and no better one left out.
func checkNominees(t *rapid.T, s *scanner, found []float64, kmin, limit, apart int) {
	if len(found) > limit {
		t.Fatalf("%d nominees, want at most %d", len(found), limit)
	}
	var at []int
	for _, shift := range found {
		at = append(at, int(math.Round(shift/testStep))-kmin)
	}
	for i, a := range at {
		if i > 0 && s.drop[a] > s.drop[at[i-1]] {
			t.Fatalf("nominee %d has a larger drop than the one before", i)
		}
		for _, b := range at[:i] {
			if d := a - b; d > -apart && d < apart {
				t.Fatalf("nominees %d and %d pixels are nearer than %d", a, b, apart)
			}
		}
	}
	if len(found) == limit {
		return
	}
	for i, v := range s.drop {
		peak := v > 4 && (i == 0 || v >= s.drop[i-1]) && (i == len(s.drop)-1 || v > s.drop[i+1])
		if peak && !slices.ContainsFunc(at, func(a int) bool { return a-i < apart && i-a < apart }) {
			t.Fatalf("the peak at lag %d is neither among the nominees %v nor near one", i, at)
		}
	}
}

// A line that is there is nominated first, at its redshift.
func TestNominateFindsLines(t *testing.T) {
	for _, f := range builtInFamilies(t) {
		if f.headed() || f.ZMax < 0.05 {
			continue // not scanned
		}
		for _, width := range f.Widths {
			l := bareLevel(4600)
			l.start = math.Log10(3600)
			z := 0.5 * (f.ZMin + f.ZMax)
			if f.Name == "emission" {
				z = 0.8 // in the middle of its range the optical has none of its lines
			}
			shift := math.Round(math.Log10(1+z)/testStep) * testStep
			var d drawing
			for c := range f.components {
				comp := f.components[c]
				comp.forest, comp.dense = false, nil
				comp.draw(&d, l.n, l.start, l.step, shift, width)
				for i, v := range d.values {
					l.resid[i] += 3 * v
				}
			}
			var s scanner
			s.resp.reset(l)
			found := s.nominate(nil, l, f, width, everything(), 14, 6)
			if len(found) == 0 {
				t.Errorf("%s, %g km/s: nothing nominated", f.Name, width)
				continue
			}
			// Emission and absorption of a family cancel in part and positions
			// are rounded: within a sigma of the lines, or a pixel.
			if tol := math.Max(1.5, width/kmsPixel) * testStep; math.Abs(found[0]-shift) > tol {
				t.Errorf("%s, %g km/s: nominated z = %.5f first, the lines are at %.5f", f.Name, width, math.Pow(10, found[0])-1, math.Pow(10, shift)-1)
			}
		}
	}
}

// Wide filters on binned pixels are those on all pixels within the blur of
// bins of f and the linear way between them, f^2/12 + f^2/8 over 2 sigma^2 of the
// curvature: 1.8 % at most.
func TestBinnedFilter(t *testing.T) {
	for k := binFrom; k < ladderSize; k++ {
		sigma := rungSigma(k)
		f := float64(binning(k))
		blur := (f*f/12 + f*f/8) / (2 * sigma * sigma)
		room := blur + 0.0022 // the tails beyond 3.5 sigma, cut at another pixel
		if blur > 0.019 {
			t.Errorf("rung %d blurs by %.4f", k, blur)
		}
		for _, n := range []int{1200, 1201, 1202, 1203} {
			l := bareLevel(n)
			for i := range n {
				l.resid[i] = gaussianAt(i, 640.3, 14, 1)
			}
			l.resid[n-1], l.resid[0] = 0.1, 0.1 // the ends are not forgotten
			var resp, direct responses
			resp.reset(l)
			num, _ := resp.get(k, 0)
			want := make([]float64, n)
			direct.filter(want, l.resid, sigma)
			top := slices.Max(want)
			for i := range n {
				if math.Abs(num[i]-want[i]) > room*top {
					t.Fatalf("%d pixels, rung %d, pixel %d: %g, want %g of at most %g", n, k, i, num[i], want[i], top)
				}
			}
		}
	}
}

func TestFilterAgainstDirectSum(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 5))
	src := make([]float64, 90)
	for i := range src {
		src[i] = r.NormFloat64()
	}
	for _, sigma := range []float64{0.7, 3, 40} {
		got := make([]float64, len(src))
		var resp responses
		resp.filter(got, src, sigma)
		half := math.Ceil(3.5 * sigma)
		for i := range src {
			want := 0.0
			for j, v := range src {
				if u := float64(i - j); math.Abs(u) <= half {
					want += v * math.Exp(-0.5*u*u/(sigma*sigma))
				}
			}
			if math.Abs(got[i]-want) > 1e-12*float64(len(src)) {
				t.Errorf("sigma %g, pixel %d: %.15g, want %.15g", sigma, i, got[i], want)
			}
		}
	}
}

// survival is what a dense projection leaves of a Gaussian.
func TestSurvivalAgainstProjection(t *testing.T) {
	const spacing = 60.0
	got := survival(spacing)
	const intervals, phases = 9, 5
	n := int(intervals * spacing)
	basis := continuum.NewBasis(0, float64(n-1), spacing)
	design := mat.NewDense(n, basis.Size(), nil)
	for i := range n {
		j, v := basis.Eval(float64(i))
		for a := range v {
			design.Set(i, j+a, v[a])
		}
	}
	var qr mat.QR
	qr.Factorize(design)
	var full mat.Dense
	qr.QTo(&full)
	q := full.Slice(0, n, 0, basis.Size())
	for k := range ladderSize {
		sum := 0.0
		for p := range phases {
			g := mat.NewVecDense(n, nil)
			for i := range n {
				u := (float64(i) - float64(n)/2 - spacing*float64(p)/phases) / rungSigma(k)
				g.SetVec(i, math.Exp(-0.5*u*u))
			}
			var c mat.VecDense
			c.MulVec(q.T(), g)
			sum += (1 - mat.Dot(&c, &c)/mat.Dot(g, g)) / phases
		}
		// A ridge of 1e-12 and equations conditioned like 1e3.
		if want := math.Max(0.02, sum); math.Abs(got[k]-want) > 1e-8 {
			t.Errorf("rung %d: %.9f survives, a dense projection leaves %.9f", k, got[k], want)
		}
		if k > 0 && got[k] > got[k-1] {
			t.Errorf("rung %d: %.4f survives, more than of the narrower rung before", k, got[k])
		}
	}
	// A spline of k coefficients takes k/n of the square norm of white noise, so
	// of a narrow line (sum g)^2/(sum g^2) = 2 sqrt(pi) sigma times that, or less
	// away from the ends.
	if least := 1 - 2*math.Sqrt(math.Pi)*float64(basis.Size())/float64(n); got[0] < least {
		t.Errorf("of a line of one pixel %.3f survives, want at least %.3f", got[0], least)
	}
}

// BenchmarkNominate scans all families and widths over one spectrum.
func BenchmarkNominate(b *testing.B) {
	finder := newTestFinder(b, builtInFamilies(b))
	s := finder.NewScratch()
	grids, _ := synthetic(1, 1)
	var res Result
	if !finder.prepare(grids[0], s, &res) {
		b.Fatal(res.Reason)
	}
	b.ReportAllocs()
	for b.Loop() {
		s.scan.reset(&s.full)
		s.scanCoarse.reset(&s.coarse)
		finder.sweep(s)
		for _, f := range finder.families {
			for _, width := range f.Widths {
				finder.trials(s, f, width)
			}
		}
	}
}
