package pipeline_test

import (
	"math"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// A row of too few pixels says how many there are, how many are needed and what took the
// others, with file, HDU and column.
func TestFewPixelsSaysWhy(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	input := func(n int, start, step float64, losses ...spectrum.Loss) *spectrum.Spectrum {
		seg := spectrum.Segment{Wave: make([]float64, n), Flux: make([]float64, n), Ivar: make([]float64, n)}
		lost := 0
		for _, l := range losses {
			lost += l.Pixels
		}
		for i := range n {
			seg.Wave[i], seg.Flux[i] = start+step*float64(i), 10+math.Sin(float64(i*i))
			if i >= lost {
				seg.Ivar[i] = 1
			}
		}
		return &spectrum.Spectrum{SourceFile: "p01/lantern.fits", Segments: []spectrum.Segment{seg}, Pixels: n, Losses: losses, BaryVelocity: math.NaN()}
	}
	for _, tt := range []struct {
		name string
		s    *spectrum.Spectrum
		want string
	}{
		{"two causes, the greater first", input(3000, 4000, 1, spectrum.Loss{Cause: "flux NaN or infinite", Where: "column FLUX of HDU 1", Pixels: 50},
			spectrum.Loss{Cause: "sigma negative", Where: "column ERR of HDU 1", Pixels: 2950}),
			"p01/lantern.fits: too few usable pixels: 0 of 3000, where 200 are needed; not used: 2950 sigma negative (column ERR of HDU 1), 50 flux NaN or infinite (column FLUX of HDU 1)"},
		// 4049/4000 is 52.9 steps of the grid from center to center.
		{"short", input(50, 4000, 1), "p01/lantern.fits: too few usable pixels: 50 of 50, which are 54 on the grid of 0.0001 dex, where 200 are needed; the file covers 4000.0 to 4049.0 Angstrom"},
		{"radio", input(3000, 2e8, 1e5), "0 of 3000, where 200 are needed; not used: 3000 outside 900 to 26000 Angstrom; the file covers 2e+08 to 5e+08 Angstrom"},
	} {
		o := chain.NewWorker().Process(tt.s).Object
		if !strings.Contains(o.Reason, tt.want) || !o.Flags.Has(catalog.FewPixels) {
			t.Errorf("%s: reason %q with flags %v, want %q", tt.name, o.Reason, o.Flags.Names(), tt.want)
		}
	}
}
