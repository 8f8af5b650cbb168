package main

import (
	"math"
	"math/rand/v2"
	"sort"
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
