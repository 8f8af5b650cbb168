package redshift

import (
	"math"
	"testing"

	"duskline/hydrogen"

	"pgregory.net/rapid"
)

// Runs stay sorted, apart and cover what was included, no more.
func TestDrawingInclude(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const n = 60
		var d drawing
		d.reset(n)
		var covered [n]bool
		for range rapid.IntRange(0, 12).Draw(t, "ranges") {
			lo := rapid.IntRange(0, n-1).Draw(t, "lo")
			hi := rapid.IntRange(lo+1, min(n, lo+15)).Draw(t, "hi")
			d.include(lo, hi)
			for i := lo; i < hi; i++ {
				covered[i] = true
			}
			var seen [n]bool
			last := -1
			for _, r := range d.runs {
				if r.lo >= r.hi || r.lo <= last {
					t.Fatalf("runs %v are empty, touch or are out of order", d.runs)
				}
				last = r.hi
				for i := r.lo; i < r.hi; i++ {
					seen[i] = true
				}
			}
			if seen != covered {
				t.Fatalf("runs %v do not cover what was included", d.runs)
			}
		}
	})
}

// A drawing that is reset is zero everywhere, whatever lengths it had before.
func TestDrawingReset(t *testing.T) {
	var d drawing
	for _, n := range []int{100, 40, 100, 7, 40, 200, 100} {
		d.reset(n)
		if len(d.values) != n || len(d.runs) != 0 {
			t.Fatalf("%d values, %d runs after reset(%d)", len(d.values), len(d.runs), n)
		}
		for i, v := range d.values {
			if v != 0 {
				t.Fatalf("value %d of %d is %g after reset", i, n, v)
			}
		}
		gaussian(&d, n, 0.3*float64(n), 5, 1)
		gaussian(&d, n, 0.9*float64(n), 2, 1)
	}
}

// gaussianAt is what gaussian draws, by definition.
func gaussianAt(i int, center, sigma, amp float64) float64 {
	u := (float64(i) - center) / sigma
	if math.Abs(u) > reach {
		return 0
	}
	return amp * math.Exp(-0.5*u*u)
}

func TestGaussianAgainstExponential(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 3000).Draw(t, "pixels")
		sigma := math.Exp(rapid.Float64Range(math.Log(0.15), math.Log(800)).Draw(t, "log sigma"))
		center := rapid.Float64Range(-2, 3).Draw(t, "center") * float64(n)
		amp := rapid.Float64Range(-3, 3).Draw(t, "amplitude")
		var d drawing
		d.reset(n)
		gaussian(&d, n, center, sigma, amp)
		if len(d.runs) > 1 {
			t.Fatalf("runs %v", d.runs)
		}
		for i, v := range d.values {
			want := gaussianAt(i, center, sigma, amp)
			if edge := math.Abs(float64(i)-center) / sigma; math.Abs(edge-reach) < 1e-9 {
				continue // on the rim by rounding
			}
			// The recurrence multiplies up to 4 sigma ratios that each carry
			// half an ulp times their number: (4*800)^2/2 * 1e-16.
			if math.Abs(v-want) > 1e-9*math.Abs(amp) {
				t.Fatalf("pixel %d: %.12g, want %.12g", i, v, want)
			}
			if inside := len(d.runs) == 1 && i >= d.runs[0].lo && i < d.runs[0].hi; v != 0 && !inside {
				t.Fatalf("pixel %d is %g outside %v", i, v, d.runs)
			}
		}
	})
}

// Edges and heads come from the table within what linear interpolation over
// 1e-4 dex costs: h^2/8 times the second derivative, which is largest on the
// Gaussian side of a head, 2/headBlur^2: 1.2 % at 7900 Angstrom. Where a shape
// jumps (at the cut ends of edges and heads) one table pixel is left out.
func TestTableAgainstFormulas(t *testing.T) {
	edges := []edge{{Wave: 3990, Width: 40, Height: 1}, {Wave: 5000, Width: 25, Height: 0.4, From: 4800}}
	heads := []head{{Wave: 5168.5, Depth: 1, Tail: 150}, {Wave: 7090, Depth: 0.5, Tail: 120, Blue: true}}
	table := newTable(edges, heads)
	cuts := []float64{3990 + 12*40, 5000 + 12*25, 4800, 5168.5, 5168.5 + 6*150, 5168.5 - 3*headBlur, 7090, 7090 - 6*120, 7090 + 3*headBlur}
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 3000).Draw(t, "pixels")
		start := rapid.Float64Range(2.5, 4.7).Draw(t, "start")
		step := rapid.SampledFrom([]float64{2e-5, 1e-4, 4e-4, 1e-3}).Draw(t, "step")
		var d drawing
		d.reset(n)
		table.draw(&d, n, start, step)
	pixels:
		for i, v := range d.values {
			x := start + float64(i)*step
			wave := math.Pow(10, x)
			want := 0.0
			for k := range edges {
				want -= edges[k].at(wave)
			}
			for k := range heads {
				want -= heads[k].at(wave)
			}
			if x < tableStart {
				want = 0 // the table ends
			}
			if math.Abs(x-tableStart) < 2*tableStep {
				continue
			}
			for _, c := range cuts {
				if math.Abs(x-math.Log10(c)) < 1.01*tableStep {
					continue pixels
				}
			}
			h := wave * ln10 * tableStep
			if tol := h*h/8*2/(headBlur*headBlur) + 1e-4; math.Abs(v-want) > tol {
				t.Fatalf("at %.2f Angstrom: %.6f, want %.6f within %.6f", wave, v, want, tol)
			}
			if inside := len(d.runs) == 1 && i >= d.runs[0].lo && i < d.runs[0].hi; v != 0 && !inside {
				t.Fatalf("pixel %d is %g outside %v", i, v, d.runs)
			}
		}
	})
	if newTable(nil, nil) != nil {
		t.Error("a table of nothing")
	}
}

// The forest is the mean transmission less one. The table is linear in
// redshift over steps of 0.1 and in log wavelength over steps of 4e-4 dex; away
// from the steps at the Lyman lines, where a table pixel is left out on each
// side, that costs up to 0.6 percent of the continuum, most of it below the
// Lyman limit.
func TestForestAgainstTransmission(t *testing.T) {
	var series []float64
	for n := 2; n <= 45; n++ {
		tr, err := hydrogen.NewTransition(1, n)
		if err != nil {
			break
		}
		series = append(series, math.Log10(tr.Wave))
	}
	if len(series) < 30 {
		t.Fatalf("only %d Lyman lines", len(series))
	}
	table := forest()
	var row []float64
	rapid.Check(t, func(t *rapid.T) {
		z := rapid.Float64Range(0.01, 7.5).Draw(t, "z")
		const n = 2000
		start := rapid.Float64Range(forestStart, 3.08).Draw(t, "start")
		step := rapid.SampledFrom([]float64{1e-4, 4e-4}).Draw(t, "step")
		var d drawing
		d.reset(n)
		table.draw(&d, &row, n, start, step, z)
	pixels:
		for i, v := range d.values {
			x := start + float64(i)*step
			// Beyond Lyman 40 the lines run together up to the limit.
			if x > math.Log10(911) && x < math.Log10(914) {
				continue
			}
			for _, s := range series {
				if math.Abs(x-s) < 1.01*forestStep {
					continue pixels
				}
			}
			wave := math.Pow(10, x)
			// Absorbers at redshift zero end the series at their rest
			// wavelengths as observed; these steps move through the rest frame
			// and the table blurs them. Ground-based spectra start redward.
			if wave*(1+z) < 1300 && wave < forestEdge {
				continue
			}
			want := hydrogen.Transmission(z, wave*(1+z)) - 1
			if math.Abs(v-want) > 0.01 {
				t.Fatalf("z = %.3f, rest %.2f Angstrom: %.5f, want %.5f", z, wave, v, want)
			}
			if wave > 1216 && v != 0 {
				t.Fatalf("z = %.3f: %g redward of Lyman alpha", z, v)
			}
		}
	})
	var d drawing
	d.reset(100)
	table.draw(&d, &row, 100, 3.0, 1e-4, 0)
	table.draw(&d, &row, 100, 3.2, 1e-4, 3)
	if len(d.runs) != 0 {
		t.Errorf("drew %v at redshift zero or redward of Lyman alpha", d.runs)
	}
	table.draw(&d, &row, 100, 3.0, 1e-4, 40)
	for i, v := range d.values {
		if !(v >= -1 && v <= 0) {
			t.Fatalf("pixel %d: transmission less one is %g at a redshift beyond the table", i, v)
		}
	}
}
