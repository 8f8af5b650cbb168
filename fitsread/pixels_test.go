package fitsread

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"

	"pgregory.net/rapid"
)

func weighted(n int, name string, w []float64, more ...tcol) []byte {
	cols := append([]tcol{{name: "WAVE", form: "D", unit: "Angstrom", data: ramp(n, 4000, 1)}, {name: "FLUX", form: "D", data: noisy(n, 2)},
		{name: name, form: "D", data: w}}, more...)
	return join(empty(), table("", n, cols))
}

// Sigma, variance and inverse variance by name; what is no error weighs zero.
func TestWeights(t *testing.T) {
	n := 100
	for name, want := range map[string]float64{"ERROR": 1.0 / 16, "SIGMA": 1.0 / 16, "VARIANCE": 0.25, "IVAR": 4} {
		w := constant(n, 4)
		w[10], w[11], w[12], w[13] = 0, -1, math.NaN(), math.Inf(1)
		seg := &first(t, weighted(n, name, w)).Segments[0]
		near(t, name, seg.Ivar[0], want, 1e-15)
		for i := 10; i < 14; i++ {
			if seg.Ivar[i] != 0 {
				t.Errorf("%s: pixel %d with error %g weighs %g", name, i, w[i], seg.Ivar[i])
			}
		}
	}
	s := first(t, weighted(n, "WEIGHT", constant(n, 0.25)))
	near(t, "a weight of 1/4 beside a scatter of 2 is an inverse variance", s.Segments[0].Ivar[0], 0.25, 1e-15)
	if !s.Has(spectrum.LayoutAssumed) {
		t.Error("the kind of weight was guessed without a warning")
	}
	if s := first(t, weighted(n, "ERROR", constant(n, 0))); !s.Has(spectrum.NoiseEstimated) || s.Segments[0].Good() != n {
		t.Errorf("errors of zero throughout are no errors: %s", codes(s))
	}
	if s := first(t, weighted(n, "IVAR", constant(n, 0))); s.Has(spectrum.NoiseEstimated) || s.Segments[0].Good() != 0 {
		t.Errorf("an inverse variance of zero throughout is no data: %s", codes(s))
	}
}

// Which masks take weight away: see applyMask.
func TestMasks(t *testing.T) {
	n := 100
	bits := constant(n, 0)
	for i := range bits {
		bits[i] = float64(i % 3 * 4) // two thirds flagged with bits of unknown meaning
	}
	few := constant(n, 0)
	few[5], few[6] = 64, 1
	zeroOne := constant(n, 0)
	zeroOne[5] = 1
	ivar, sigma := constant(n, 0.25), constant(n, 2)
	goodBut := constant(n, 1)
	goodBut[8] = 0
	tests := []struct {
		what   string
		weight string
		w      []float64
		mask   tcol
		good   int
	}{
		{"survey mask beside inverse variance", "IVAR", ivar, tcol{name: "and_mask", form: "J", data: few}, n},
		{"0/1 quality beside inverse variance", "IVAR", ivar, tcol{name: "DQ", form: "I", data: zeroOne}, n - 1},
		{"IVOA quality beside inverse variance", "IVAR", ivar, tcol{name: "QUALITY", form: "I", data: few}, n - 2},
		{"mask beside sigma", "ERR", sigma, tcol{name: "MASK", form: "J", data: few}, n - 2},
		{"mask that takes most", "ERR", sigma, tcol{name: "MASK", form: "J", data: bits}, n},
		{"good column", "ERR", sigma, tcol{name: "GOOD", form: "I", data: goodBut}, n - 1},
		{"logical", "ERR", sigma, tcol{name: "BAD", form: "L", data: zeroOne}, n - 1},
	}
	for _, tt := range tests {
		s := first(t, weighted(n, tt.weight, tt.w, tt.mask))
		if got := s.Segments[0].Good(); got != tt.good {
			t.Errorf("%s: %d good pixels, want %d", tt.what, got, tt.good)
		}
	}
	// A card that declares the serious bits: 4 is, 64 is not.
	few[7] = 4
	data := join(empty(kv("SDQFLAGS", 4)), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)},
		{name: "FLUX", form: "D", data: noisy(n, 2)}, {name: "ERR", form: "D", data: sigma}, {name: "DQ", form: "I", data: few}}))
	if seg := &first(t, data).Segments[0]; seg.Good() != n-1 || seg.Ivar[7] != 0 {
		t.Errorf("declared bits: %d good", seg.Good())
	}
}

func TestOrder(t *testing.T) {
	tests := []struct {
		name             string
		wave, want       []float64
		dropped, ordered bool
	}{
		{"in order", []float64{1, 2, 3, 4}, []float64{1, 2, 3, 4}, false, false},
		{"decreasing", []float64{4, 3, 2, 1}, []float64{1, 2, 3, 4}, false, false},
		{"repeated", []float64{1, 2, 2, 3}, []float64{1, 2, 3}, true, false},
		{"impossible", []float64{1, math.NaN(), -2, 0, math.Inf(1), 3}, []float64{1, 3}, true, false},
		{"one far off", []float64{1, 2, 900, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12}, []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12}, true, false},
		{"two orders in a row", []float64{1, 3, 5, 7, 2, 4, 6, 8}, []float64{1, 2, 3, 4, 5, 6, 7, 8}, false, true},
	}
	for _, tt := range tests {
		seg := spectrum.Segment{Wave: append([]float64{}, tt.wave...), Flux: append([]float64{}, tt.wave...), Ivar: constant(len(tt.wave), 1)}
		for i, v := range seg.Flux {
			if v-v != 0 {
				seg.Flux[i] = 1
			}
		}
		var none []float64
		dropped, sorted := order(&seg, &none)
		if len(seg.Wave) != len(tt.want) || (dropped > 0) != tt.dropped || sorted != tt.ordered {
			t.Errorf("%s: %v, %d dropped, sorted %v", tt.name, seg.Wave, dropped, sorted)
			continue
		}
		for i := range tt.want {
			if seg.Wave[i] != tt.want[i] || seg.Flux[i] != tt.want[i] {
				t.Errorf("%s: %v with fluxes %v", tt.name, seg.Wave, seg.Flux)
				break
			}
		}
	}
	// Padding without wavelength and weight is nobody's loss.
	seg := spectrum.Segment{Wave: []float64{1, 2, 0, 0}, Flux: make([]float64, 4), Ivar: []float64{1, 1, 0, 0}}
	var none []float64
	if dropped, _ := order(&seg, &none); dropped != 0 || seg.Len() != 2 {
		t.Errorf("padding: %d dropped, %d left", dropped, seg.Len())
	}
}

// Whatever the numbers, order leaves increasing wavelengths and equal lengths.
func TestOrderAlways(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.SliceOf(rapid.OneOf(rapid.Float64(), rapid.Float64Range(1, 10), rapid.Just(math.NaN()), rapid.Just(math.Inf(1)))).Draw(t, "wave")
		seg := spectrum.Segment{Wave: append([]float64{}, v...), Flux: constant(len(v), 1), Ivar: constant(len(v), 1)}
		res := constant(len(v), 1)
		order(&seg, &res)
		seg.Resolution = res
		if err := seg.Check(); err != nil {
			t.Fatal(err)
		}
	})
}

// The median equals the one by counting; it selects instead of sorting.
func TestMedian(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.SliceOfN(rapid.Float64Range(-5, 5), 1, 60).Draw(t, "v")
		m := medianOf(append([]float64{}, v...))
		below, equal := 0, 0
		for _, x := range v {
			if x < m {
				below++
			} else if x == m {
				equal++
			}
		}
		if !(below <= len(v)/2 && below+equal > len(v)/2) {
			t.Fatalf("%g is no median of %v", m, v)
		}
	})
}

// The estimate of Stoehr et al. 2008 gives the sigma of Gaussian noise on a
// sloping continuum with lines. 300 pixels a window scatter it by about 6 %
// (median of |Gauss|: relative error 1.17/sqrt(n) and the correlation of
// neighbors), 3,000 in all by 3 %.
func TestNoiseEstimate(t *testing.T) {
	n := 3000
	r := rand.New(rand.NewPCG(3, 4))
	flux := make([]float64, n)
	for i := range flux {
		sigma := 1.0
		if i >= n/2 {
			sigma = 3
		}
		flux[i] = 50 + 0.01*float64(i) + sigma*r.NormFloat64()
		if i%500 < 8 {
			flux[i] += 40
		}
	}
	ivar := constant(n, 1)
	estimateIvar(flux, ivar)
	near(t, "sigma of the first half", 1/math.Sqrt(ivar[500]), 1, 0.2)
	near(t, "sigma of the second half", 1/math.Sqrt(ivar[2500]), 3, 0.2)
	white := noisy(3000, 2)
	near(t, "scatter", scatter(white), 2, 0.1)
	if ratio, suspect := scatterRatio(white, constant(3000, 0.25)); suspect || math.Abs(ratio-1) > 0.1 {
		t.Errorf("right errors: ratio %g, suspect %v", ratio, suspect)
	}
	for stated, isSuspect := range map[float64]bool{0.4: true, 1.4: false, 3.5: false, 8: true} {
		if ratio, suspect := scatterRatio(white, constant(3000, 1/(stated*stated))); suspect != isSuspect {
			t.Errorf("scatter 2, stated %g: ratio %g, suspect %v", stated, ratio, suspect)
		}
	}
}

// Errors that are too small are told at any S/N, and the lines of a star at high S/N
// are not taken for noise.
func TestErrorsTooSmallAtHighSignal(t *testing.T) {
	n := 4000
	for _, sn := range []float64{5, 20, 60, 300} {
		flux := noisy(n, 1)
		lined := make([]float64, n)
		for i := range flux {
			flux[i] += sn
			lined[i] = flux[i]
			// Lines 4 pixels wide, of 1 to 30 %, over three quarters of the spectrum.
			if i > n/4 {
				lined[i] -= sn * 0.3 * math.Pow(math.Sin(float64(i)/4), 2) * math.Pow(math.Sin(float64(i)/900), 2)
			}
		}
		for _, factor := range []float64{1, 2, 5, 10} {
			ratio, suspect := scatterRatio(flux, constant(n, factor*factor))
			if suspect != (factor > 3) || math.Abs(ratio/factor-1) > 0.1 {
				t.Errorf("S/N %g, errors a factor %g too small: ratio %g, suspect %v", sn, factor, ratio, suspect)
			}
		}
		if ratio, suspect := scatterRatio(lined, constant(n, 1)); suspect {
			t.Errorf("S/N %g, right errors, with lines: ratio %g, suspect", sn, ratio)
		} else if sn == 300 && ratio < 3 {
			t.Errorf("lines that scatter by %g only test nothing", ratio)
		}
	}
}

// Spectra without noise get finite weights; without flux, none.
func TestNoiseOfModels(t *testing.T) {
	n := 600
	ivar := constant(n, 1)
	estimateIvar(ramp(n, 100, 0.1), ivar)
	near(t, "floor of a thousandth of the median flux", 1/math.Sqrt(ivar[0]), 0.130, 1e-3)
	ivar = constant(n, 1)
	estimateIvar(constant(n, 0), ivar)
	if ivar[0] != 0 {
		t.Errorf("no flux weighs %g", ivar[0])
	}
}

func TestBlankEnds(t *testing.T) {
	n := 400
	pad := func(flux, sigma []float64) *spectrum.Segment {
		cols := []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)}, {name: "FLUX", form: "D", data: flux}, {name: "ERR", form: "D", data: sigma}}
		return &first(t, join(empty(), table("", n, cols))).Segments[0]
	}
	flux, sigma := noisy(n, 1), constant(n, 1)
	for i := range 30 {
		flux[i] = 3
		flux[n-1-i] = 0
	}
	if seg := pad(flux, sigma); seg.Good() != n-60 || seg.Ivar[29] != 0 || seg.Ivar[30] == 0 || seg.Ivar[n-30] != 0 {
		t.Errorf("flat ends: %d good, want %d", seg.Good(), n-60)
	}
	// A smooth slope at an end of a noisy spectrum is padding as well; a pixel more
	// or less at its inner edge is a matter of chance.
	flux = noisy(n, 1)
	for i := range 40 {
		flux[i] = 1 / (1 + 0.001*float64(i))
	}
	if seg := pad(flux, sigma); math.Abs(float64(seg.Good()-(n-40))) > 2 {
		t.Errorf("smooth end: %d good, want about %d", seg.Good(), n-40)
	}
	// A model without noise but with errors is no padding.
	if seg := pad(ramp(n, 10, 0.01), sigma); seg.Good() != n {
		t.Errorf("model: %d good", seg.Good())
	}
}

func TestResolution(t *testing.T) {
	n := 100
	for name, want := range map[string]float64{
		"FWHM":       4050 / 2.0,
		"RESOLUTION": 2,
		"WDISP":      4050 / (2 * math.Sqrt(2*math.Ln2) * 2 * 1),
	} {
		v := constant(n, 2)
		v[50+1] = 0 // missing: the nearest good value
		seg := &first(t, weighted(n, "ERR", constant(n, 2), tcol{name: name, form: "D", data: v})).Segments[0]
		near(t, name, seg.Resolution[50], want, 1e-12)
		near(t, name+", missing value", seg.Resolution[51], want, 1e-12)
	}
	data := join(empty(kv("SPEC_RES", 5100.0)), table("", n, []tcol{{name: "WAVE", form: "D", unit: "nm", data: ramp(n, 400, 1)}, {name: "FLUX", form: "D", data: noisy(n, 1)}}))
	if r := first(t, data).Segments[0].Resolution; len(r) != 1 || r[0] != 5100 {
		t.Errorf("card: %v", r)
	}
}
