package spectrum

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

const testStep = 1e-4

func newGridder() *Gridder { return &Gridder{Step: testStep, MinWave: 900, MaxWave: 26000} }

// gridOf lays segments on a grid of their own.
func gridOf(gr *Gridder, segs ...Segment) *Grid {
	g := &Grid{}
	gr.Grid(g, &Spectrum{Segments: segs})
	return g
}

// filled returns n times v.
func filled(n int, v float64) []float64 {
	s := make([]float64, n)
	for i := range s {
		s[i] = v
	}
	return s
}

// logWaves returns wavelengths at 10^(start + k*step) for k = at[i].
func logWaves(start, step float64, at []float64) []float64 {
	w := make([]float64, len(at))
	for i, k := range at {
		w[i] = math.Pow(10, start+k*step)
	}
	return w
}

func counting(n int) []float64 {
	s := make([]float64, n)
	for i := range s {
		s[i] = float64(i)
	}
	return s
}

// A spectrum that is uniform in log10 with the gridder's step keeps every
// flux and weight bit for bit, at its own phase, with pixels missing or
// without weight.
func TestGridKeepsLogPixels(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		start := rapid.Float64Range(3, 4).Draw(t, "start")
		n := rapid.IntRange(2, 300).Draw(t, "pixels")
		var at, flux, ivar []float64
		for k := range n {
			inner := k > 0 && k < n-1
			if inner && k%3 == 0 && rapid.Bool().Draw(t, "missing") {
				continue
			}
			// Headers and single-precision tables round wavelengths.
			at = append(at, float64(k)+rapid.Float64Range(-0.04, 0.04).Draw(t, "rounding"))
			flux = append(flux, rapid.Float64Range(-10, 10).Draw(t, "flux"))
			w := rapid.Float64Range(0.1, 5).Draw(t, "ivar")
			if inner && rapid.IntRange(0, 9).Draw(t, "bad") == 0 {
				w = 0
				flux[len(flux)-1] = math.NaN()
			}
			ivar = append(ivar, w)
		}
		wave := logWaves(start, testStep, at)
		g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: ivar})
		if g.Len() != n {
			t.Fatalf("%d pixels, want %d", g.Len(), n)
		}
		if g.Start != math.Log10(wave[0]) {
			t.Fatalf("starts at %v, want the center of the first pixel, %v", g.Start, math.Log10(wave[0]))
		}
		want, weight := make([]float64, n), make([]float64, n)
		for i, k := range at {
			if ivar[i] > 0 {
				q := int(math.Round(k))
				want[q], weight[q] = flux[i], ivar[i]
			}
		}
		for q := range n {
			if g.Flux[q] != want[q] || g.Ivar[q] != weight[q] {
				t.Fatalf("pixel %d: %v with weight %v, want %v with %v", q, g.Flux[q], g.Ivar[q], want[q], weight[q])
			}
		}
	})
}

// uneven draws wavelengths whose spacing wanders between 0.4 and 2.5 grid
// pixels, neighbors differing by less than a fifth, and returns them with the
// widths of their pixels (edges half-way to the neighbors) in grid pixels.
func uneven(t *rapid.T) (wave, width []float64) {
	n := rapid.IntRange(60, 200).Draw(t, "input pixels")
	start := rapid.Float64Range(3.3, 3.9).Draw(t, "start")
	phase := rapid.Float64Range(0, 6).Draw(t, "phase")
	at, x := make([]float64, n), 0.0
	for i := range at {
		at[i] = x
		x += math.Exp(0.9 * math.Sin(0.1*float64(i)+phase))
	}
	wave = logWaves(start, testStep, at)
	width = make([]float64, n)
	for i := range width {
		left := wave[0] - 0.5*(wave[1]-wave[0])
		if i > 0 {
			left = 0.5 * (wave[i-1] + wave[i])
		}
		right := wave[n-1] + 0.5*(wave[n-1]-wave[n-2])
		if i < n-1 {
			right = 0.5 * (wave[i] + wave[i+1])
		}
		width[i] = math.Log10(right/left) / testStep
	}
	return wave, width
}

// Flux is conserved: the sum of flux times log width is that of the input. The
// outermost input pixels, which reach beyond the grid, hold no flux here.
func TestRebinConservesFlux(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		wave, width := uneven(t)
		n := len(wave)
		flux, ivar := make([]float64, n), make([]float64, n)
		in, scale := 0.0, 0.0
		for i := range flux {
			if i > 10 && i < n-11 {
				flux[i] = rapid.Float64Range(-5, 5).Draw(t, "flux")
			}
			ivar[i] = rapid.Float64Range(0.1, 10).Draw(t, "ivar")
			in += flux[i] * width[i]
			scale += math.Abs(flux[i]) * width[i]
		}
		g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: ivar})
		out := 0.0
		for i, f := range g.Flux {
			if g.Ivar[i] > 0 {
				out += f
			}
		}
		// Overlaps are differences of logarithms over 1e-4: 1e-16*3.5/1e-4 a
		// pixel, 1e-11 with hundreds of them.
		if math.Abs(in-out) > 1e-10*(scale+1) {
			t.Fatalf("flux times width: %.12g in, %.12g out", in, out)
		}
	})
}

// Information is conserved where it is spread evenly: input weights in
// proportion to their widths give every covered pixel that density. Uneven
// weights can only lose some, by the Cauchy-Schwarz inequality, because the
// mean is over length.
func TestRebinConservesInformation(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		wave, width := uneven(t)
		n := len(wave)
		flux, ivar := filled(n, 1), make([]float64, n)
		density := rapid.Float64Range(1e-3, 1e3).Draw(t, "density")
		for i := range ivar {
			ivar[i] = density * width[i]
		}
		g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: ivar})
		for q := 1; q < g.Len()-1; q++ {
			if math.Abs(g.Ivar[q]/density-1) > 1e-9 {
				t.Fatalf("pixel %d weighs %g, want the density %g", q, g.Ivar[q], density)
			}
			if math.Abs(g.Flux[q]-1) > 1e-12 {
				t.Fatalf("pixel %d: a flat spectrum became %g", q, g.Flux[q])
			}
		}
		in, out := 0.0, 0.0
		for i := range ivar {
			ivar[i] = rapid.Float64Range(0, 10).Draw(t, "ivar")
			in += ivar[i]
		}
		g = gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: ivar})
		for _, w := range g.Ivar {
			out += w
		}
		if out > in*(1+1e-9) {
			t.Fatalf("summed weight %g grew to %g", in, out)
		}
	})
}

// A linear spectrum keeps the position of a line: the flux-weighted mean of
// log wavelength does not move.
func TestRebinKeepsPositions(t *testing.T) {
	const line, sigma = 6000.3, 3.0
	n := 900
	wave, flux := make([]float64, n), make([]float64, n)
	for i := range wave {
		wave[i] = 5600 + 0.9*float64(i)
		u := (wave[i] - line) / sigma
		flux[i] = math.Exp(-0.5 * u * u)
	}
	g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: filled(n, 1)})
	sum, first := 0.0, 0.0
	for i, f := range g.Flux {
		sum += f
		first += f * g.LogWave(i)
	}
	// With weights dlambda/lambda the mean of ln(lambda) of a Gaussian of
	// relative width q lies 3/2 q^2 below its center (second order), where the
	// variance of the input pixel, 0.9^2/12, adds to q^2: -0.113 km/s. What is
	// left is the fourth order and the sampling: 0.02 km/s is 3e-4 of a pixel.
	q2 := (sigma*sigma + 0.9*0.9/12) / (line * line)
	shift := (first/sum - math.Log10(line)) * math.Ln10 * SpeedOfLight
	if want := -1.5 * q2 * SpeedOfLight; math.Abs(shift-want) > 0.02 {
		t.Errorf("a line moved by %.4f km/s, want %.4f", shift, want)
	}
}

// Where pixels are missing, a grid pixel weighs the density times the length
// that is covered, or nothing when that is less than half of it.
func TestRebinPartlyCoveredPixels(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		wave, width := uneven(t)
		n := len(wave)
		const density = 3.0
		ivar := make([]float64, n)
		for i := range ivar {
			if i == 0 || i == n-1 || rapid.IntRange(0, 3).Draw(t, "bad") > 0 {
				ivar[i] = density * width[i]
			}
		}
		g := gridOf(newGridder(), Segment{Wave: wave, Flux: filled(n, 1), Ivar: ivar})
		covered := make([]float64, g.Len())
		left := (math.Log10(wave[0]-0.5*(wave[1]-wave[0])) - g.Start) / testStep
		for i, d := range width {
			for q := range covered {
				if l := math.Min(left+d, float64(q)+0.5) - math.Max(left, float64(q)-0.5); l > 0 && ivar[i] > 0 {
					covered[q] += l
				}
			}
			left += d
		}
		for q, l := range covered {
			want := density * l
			if math.Abs(l-0.5) < 1e-6 {
				continue // on the limit by rounding
			}
			if l < 0.5 {
				want = 0
			}
			if math.Abs(g.Ivar[q]-want) > 1e-8 {
				t.Fatalf("pixel %d, covered by %.4f, weighs %g, want %g", q, l, g.Ivar[q], want)
			}
		}
	})
}

func TestRebinLeavesMaskedPixelsOut(t *testing.T) {
	n := 400
	wave, flux, ivar := make([]float64, n), filled(n, 2), filled(n, 1)
	for i := range wave {
		wave[i] = 5000 + 0.5*float64(i) // 0.43 grid pixels
	}
	for i := 100; i < 140; i++ {
		flux[i], ivar[i] = math.NaN(), 0
	}
	g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: ivar})
	empty := 0
	for q := range g.Flux {
		w := math.Pow(10, g.LogWave(q))
		switch {
		case g.Ivar[q] == 0:
			empty++
			if g.Flux[q] != 0 {
				t.Errorf("pixel %d without weight has flux %g", q, g.Flux[q])
			}
			// Half covered at least weighs: its center must lie in the hole.
			if w < wave[100]-0.25 || w > wave[139]+0.25 {
				t.Errorf("pixel at %.2f Angstrom is empty outside the hole", w)
			}
		case math.Abs(g.Flux[q]-2) > 1e-12:
			t.Errorf("pixel at %.2f Angstrom: %g, want 2", w, g.Flux[q])
		}
	}
	// 40 pixels of 0.5 Angstrom are 17.3 grid pixels of 1.155 Angstrom.
	if empty < 16 || empty > 18 {
		t.Errorf("%d empty pixels, want 17 give or take one", empty)
	}
}

// Where a file leaves pixels out, the ones beside the hole keep their width:
// nothing is drawn over the hole.
func TestRebinLeavesHolesEmpty(t *testing.T) {
	var wave, flux []float64
	for i := range 600 {
		w := 5000 + 0.7*float64(i)
		if w > 5100 && w < 5250 {
			continue
		}
		wave, flux = append(wave, w), append(flux, 1)
	}
	g := gridOf(newGridder(), Segment{Wave: wave, Flux: flux, Ivar: filled(len(wave), 1)})
	for q := range g.Flux {
		w := math.Pow(10, g.LogWave(q))
		if w > 5102 && w < 5248 && g.Ivar[q] > 0 {
			t.Fatalf("pixel at %.1f Angstrom, inside a hole without data, weighs %g", w, g.Ivar[q])
		}
		if (w < 5099 || w > 5251) && g.Ivar[q] == 0 {
			t.Fatalf("pixel at %.1f Angstrom, outside the hole, has no weight", w)
		}
	}
}

func TestGridDegenerateInput(t *testing.T) {
	one := Segment{Wave: []float64{5000}, Flux: []float64{1}, Ivar: []float64{1}}
	other := Segment{Wave: []float64{5010}, Flux: []float64{1}, Ivar: []float64{1}}
	dark := Segment{Wave: logWaves(3.7, testStep, counting(50)), Flux: filled(50, math.NaN()), Ivar: make([]float64, 50)}
	lone := dark
	lone.Flux, lone.Ivar = filled(50, 1), make([]float64, 50)
	lone.Ivar[20] = 1
	blue := Segment{Wave: logWaves(2.5, testStep, counting(50)), Flux: filled(50, 1), Ivar: filled(50, 1)}
	for name, segs := range map[string][]Segment{
		"no segment": nil, "no pixel": {{}}, "one pixel": {one}, "two segments of one pixel": {one, other},
		"no weight": {dark}, "one pixel with weight": {lone}, "outside the bounds": {blue},
	} {
		g := gridOf(newGridder(), segs...)
		if n, first, last := g.Good(); n != 0 || first != 0 || last != -1 {
			t.Errorf("%s: %d good pixels from %d to %d, want none", name, n, first, last)
		}
		if len(g.Flux) != len(g.Ivar) {
			t.Errorf("%s: %d fluxes, %d weights", name, len(g.Flux), len(g.Ivar))
		}
	}
	// One of several segments may be empty of data without harm.
	good := Segment{Wave: logWaves(3.7, testStep, counting(300)), Flux: filled(300, 1), Ivar: filled(300, 1)}
	if n, _, _ := gridOf(newGridder(), dark, good, one).Good(); n < 299 {
		t.Errorf("%d good pixels beside segments without data, want 300", n)
	}
}

// Whatever a segment that keeps its contract holds, the grid is finite, inside
// the bounds, without weight where there is no data, and the same however the
// gridder was used before.
func TestGridAnyInput(t *testing.T) {
	used := newGridder()
	rapid.Check(t, func(t *rapid.T) {
		var segs []Segment
		for range rapid.IntRange(1, 3).Draw(t, "segments") {
			n := rapid.IntRange(0, 80).Draw(t, "pixels")
			var seg Segment
			w := rapid.Float64Range(500, 30000).Draw(t, "first")
			for range n {
				w *= 1 + rapid.SampledFrom([]float64{1e-7, 1e-4, 2.3e-4, 2.3025851e-4, 1e-3, 0.05}).Draw(t, "spacing")
				seg.Wave = append(seg.Wave, w)
				seg.Flux = append(seg.Flux, rapid.SampledFrom([]float64{0, 1, -1, 1e-17, 1e5, 1e30}).Draw(t, "flux"))
				seg.Ivar = append(seg.Ivar, rapid.SampledFrom([]float64{0, 1, 1e-60, 1e34}).Draw(t, "ivar"))
			}
			if err := seg.Check(); err != nil {
				t.Fatal(err)
			}
			segs = append(segs, seg)
		}
		fresh, again := gridOf(newGridder(), segs...), gridOf(used, segs...)
		if fresh.Len() != again.Len() {
			t.Fatalf("%d pixels from a fresh gridder, %d from a used one", fresh.Len(), again.Len())
		}
		for i := range fresh.Flux {
			f, w := fresh.Flux[i], fresh.Ivar[i]
			if f != again.Flux[i] || w != again.Ivar[i] {
				t.Fatalf("pixel %d: %g, %g from a fresh gridder, %g, %g from a used one", i, f, w, again.Flux[i], again.Ivar[i])
			}
			if !(w >= 0) || math.IsInf(w, 0) || math.IsNaN(f) || math.IsInf(f, 0) {
				t.Fatalf("pixel %d: flux %g with weight %g", i, f, w)
			}
			if x := math.Pow(10, fresh.LogWave(i)); w > 0 && (x < 900*(1-1e-4) || x > 26000*(1+1e-4)) {
				t.Fatalf("pixel %d at %g Angstrom is outside the bounds", i, x)
			}
		}
	})
}

// Independent counts data, not pixels: wide input pixels cut into several count
// once, narrow ones that are averaged make one, two arms make no more pixels
// than there are.
func TestGridCountsIndependentPixels(t *testing.T) {
	arm := func(width float64, n int) Segment {
		at := counting(n)
		for i := range at {
			at[i] *= width
		}
		return Segment{Wave: logWaves(3.7, testStep, at), Flux: filled(n, 1), Ivar: filled(n, 1)}
	}
	masked := arm(1, 300)
	clear(masked.Ivar[100:140])
	for _, c := range []struct {
		name string
		segs []Segment
		want float64
	}{
		{"own pixels", []Segment{arm(1, 300)}, 300},
		{"own pixels, some without weight", []Segment{masked}, 260},
		{"pixels three times as wide", []Segment{arm(3, 300)}, 300},
		{"pixels of four tenths", []Segment{arm(0.4, 300)}, 121},
		{"two arms on the same pixels", []Segment{arm(1, 300), arm(1, 300)}, 300},
		{"two arms of wide pixels", []Segment{arm(4, 100), arm(4, 100)}, 200},
		{"nothing", nil, 0},
	} {
		// Half an input pixel at each end of an arm is cut off.
		if g := gridOf(newGridder(), c.segs...); math.Abs(g.Independent-c.want) > 2 {
			t.Errorf("%s: %.2f of %d pixels are independent, want %g", c.name, g.Independent, g.Len(), c.want)
		}
	}
}

func TestGoodCountsPixels(t *testing.T) {
	g := Grid{Flux: make([]float64, 6), Ivar: []float64{0, 1, 0, 2, 0, 0}}
	if n, first, last := g.Good(); n != 2 || first != 1 || last != 3 {
		t.Errorf("Good() = %d, %d, %d, want 2, 1, 3", n, first, last)
	}
}

func BenchmarkGridLinear(b *testing.B) {
	n := 4600
	wave := make([]float64, n)
	for i := range wave {
		wave[i] = 3600 + 1.4*float64(i)
	}
	s := &Spectrum{Segments: []Segment{{Wave: wave, Flux: filled(n, 1), Ivar: filled(n, 1)}}}
	gr, g := newGridder(), &Grid{}
	b.ReportAllocs()
	for b.Loop() {
		gr.Grid(g, s)
	}
}
