package main

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"

	"duskline/pipeline"
	"duskline/spectrum"
)

// TestSpread: names keep their order and distance, stay inside, and move only
// if they must.
func TestSpread(t *testing.T) {
	for _, c := range []struct {
		wanted, want []float64
	}{
		{nil, nil},
		{[]float64{50}, []float64{50}},
		{[]float64{20, 40, 90}, []float64{20, 40, 90}},
		{[]float64{50, 50}, []float64{45, 55}},
		{[]float64{50, 52, 54}, []float64{42, 52, 62}},
		{[]float64{0, 1}, []float64{0, 10}},
		{[]float64{99, 100}, []float64{90, 100}},
	} {
		got := spread(c.wanted, 10, 0, 100)
		if len(got) != len(c.want) {
			t.Fatalf("spread(%v) = %v, want %v", c.wanted, got, c.want)
		}
		for i := range got {
			// Exact by arithmetic; 1e-9 is rounding.
			if math.Abs(got[i]-c.want[i]) > 1e-9 {
				t.Errorf("spread(%v) = %v, want %v", c.wanted, got, c.want)
				break
			}
		}
	}
	r := rand.New(rand.NewPCG(1, 2))
	for range 1000 {
		wanted := make([]float64, 1+r.IntN(10))
		for i := range wanted {
			wanted[i] = 100 * r.Float64()
		}
		sort.Float64s(wanted)
		got := spread(wanted, 10, 0, 100)
		for i, x := range got {
			if x < -1e-9 || x > 100+1e-9 || i > 0 && x-got[i-1] < 10-1e-9 {
				t.Fatalf("spread(%v) = %v", wanted, got)
			}
		}
	}
}

// TestPictureOfNothing: an object without a usable pixel still draws.
func TestPictureOfNothing(t *testing.T) {
	nan := math.NaN()
	out := &pipeline.Outcome{}
	out.Object.Redshift, out.Object.SNR = nan, nan
	for _, view := range []pipeline.View{
		{},
		{LogWave: []float64{3.6, 3.7, 3.8}, Flux: make([]float64, 3), Ivar: make([]float64, 3)},
		{LogWave: []float64{3.6, 3.7, 3.8}, Flux: []float64{0, 0, 0}, Ivar: []float64{1, 1, 1}},
		{LogWave: []float64{3.6}, Flux: []float64{1}, Ivar: []float64{1}},
	} {
		if err := savePicture(t.TempDir()+"/p.png", newPicture(&spectrum.Spectrum{}, out, view)); err != nil {
			t.Error(err)
		}
	}
}

func TestEvenTicks(t *testing.T) {
	for _, c := range []struct {
		low, high   float64
		first, last string
	}{
		{3600, 9800, "4000", "9000"},
		{-0.35, 1.1, "0.0", "1.0"},
		{-3, 47, "0", "40"},
		{0.0001, 0.00051, "0.0001", "0.0005"},
	} {
		ticks := evenTicks{7}.Ticks(c.low, c.high)
		if len(ticks) < 3 || ticks[0].Label != c.first || ticks[len(ticks)-1].Label != c.last {
			t.Errorf("ticks from %g to %g are %v, want %s to %s", c.low, c.high, ticks, c.first, c.last)
		}
	}
}

// drawn makes a picture of n pixels out of functions of 0 to 1 along it.
func drawn(n int, flux, sigma func(x float64) float64) *picture {
	r := rand.New(rand.NewPCG(3, 4))
	p := &picture{}
	for i := range n {
		x := float64(i) / float64(n-1)
		s := sigma(x)
		p.wave = append(p.wave, 4000+5000*x)
		p.sigma = append(p.sigma, s)
		p.flux = append(p.flux, flux(x)+s*r.NormFloat64())
	}
	p.smooth = smoothed(p.flux, p.sigma)
	return p
}

// The flux axis is logarithmic where flux that is seen well spans more than a decade and
// a half, and follows neither noisy ends nor strays.
func TestRangeOfFlux(t *testing.T) {
	even := func(float64) float64 { return 1 }
	for _, c := range []struct {
		name        string
		p           *picture
		log         bool
		low, high   float64 // between which the range must lie
		least, most float64 // that it must hold
	}{
		{"a blue star over three decades", drawn(4000, func(x float64) float64 { return 1e4 * math.Pow(10, -3*x) }, even), true, 4, 1.3e4, 14, 9e3},
		{"over one decade", drawn(4000, func(x float64) float64 { return 1e3 * math.Pow(10, -x) }, even), false, -1, 1.2e3, 100, 950},
		{"over three decades, half of it noise", drawn(4000, func(x float64) float64 { return 10 * math.Pow(10, -3*x) }, even), false, -3, 12, 0, 9},
		{"noise at both ends", drawn(4000, func(float64) float64 { return 10 }, func(x float64) float64 { return 1 + 300*math.Pow(2*x-1, 12) }), false, -40, 60, 0, 11},
		{"noise alone", drawn(4000, func(float64) float64 { return 0 }, even), false, -2, 2, -0.8, 0.8},
	} {
		p := c.p
		p.setRange()
		if p.logFlux != c.log || p.low < c.low || p.high > c.high || p.low > c.least || p.high < c.most {
			t.Errorf("%s: from %g to %g, logarithmic %t; want %t, within %g to %g, %g to %g in it", c.name, p.low, p.high, p.logFlux, c.log, c.low, c.high, c.least, c.most)
		}
	}
	p := drawn(100, func(float64) float64 { return 1 }, even)
	if p.wave[99] = 16001; p.wave[0] != 4000 {
		t.Fatal("the wavelengths of the test changed")
	}
	if p.setRange(); !p.logWave {
		t.Error("wavelengths over a factor of more than four are not drawn on a logarithmic axis")
	}
}

func TestLogTicks(t *testing.T) {
	for _, c := range []struct {
		low, high float64
		n         int
		want      string
	}{
		{1150, 10500, 12, "1500 2000 3000 4000 5000 6000 8000 10000"},
		{0.0013, 7, 7, "0.003 0.01 0.03 0.1 0.3 1 3"},
		{0.0013, 7, 5, "0.01 0.1 1"},
		{0.2, 7, 7, "0.2 0.5 1 2 5"},
	} {
		got := ""
		for _, tick := range (logTicks{c.n}).Ticks(c.low, c.high) {
			got += tick.Label + " "
		}
		if strings.TrimSpace(got) != c.want {
			t.Errorf("ticks from %g to %g are %s, want %s", c.low, c.high, got, c.want)
		}
		for _, tick := range (powers{logTicks{c.n}}).Ticks(math.Log10(c.low), math.Log10(c.high)) {
			if v := math.Pow(10, tick.Value); fmt.Sprintf("%.6g", v) != tick.Label {
				t.Errorf("tick %s stands at %g", tick.Label, v)
			}
		}
	}
}

// A list that does not fit says that there is more.
func TestShortened(t *testing.T) {
	for width, want := range map[int]string{40: "tied, lone_line, few_lines", 20: "tied, lone_line ...", 9: "tied ...", 3: ""} {
		if got := shortened("tied, lone_line, few_lines", func(s string) bool { return len(s) <= width }); got != want {
			t.Errorf("in %d characters %q, want %q", width, got, want)
		}
	}
}

func TestNumber(t *testing.T) {
	for _, c := range []struct {
		x    float64
		want string
	}{{-0.04, "0.0"}, {0, "0.0"}, {-0.06, "-0.1"}, {math.NaN(), "-"}} {
		if got := number(c.x, 1); got != c.want {
			t.Errorf("number(%g) = %q, want %q", c.x, got, c.want)
		}
	}
}
