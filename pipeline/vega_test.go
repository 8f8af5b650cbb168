package pipeline_test

import (
	"math"
	"strconv"
	"testing"

	"duskline/catalog"
	"duskline/internal/checkvalues"
	"duskline/pipeline"
	"duskline/spectrum"
)

// TestVegaBalmerLines takes the public CALSPEC spectrum of Vega (alpha_lyr_stis_005,
// the excerpt that package lines carries) through the whole chain.
//
// The chain's continuum, which nobody told where the line-free windows are, must
// give the equivalent widths of vega_ew.csv in the same windows, as a continuum does
// that differs by 0.5 %. Those widths have a straight continuum between sidebands;
// the blue sideband of H-delta lies on the wing of the next line, where the
// extrapolated continuum is 3 % higher: 1 % in the mean over that window.
//
// The profile fits have wings without end. What a profile (1 + (x/s)^2)^(-5/4) of the
// width found has inside the window must be the tabulated value within 6 %.
func TestVegaBalmerLines(t *testing.T) {
	var seg spectrum.Segment
	for _, row := range checkvalues.Rows(t, "../lines/testdata/vega_calspec_excerpt.csv") {
		wave, err1 := strconv.ParseFloat(row[0], 64)
		flux, err2 := strconv.ParseFloat(row[1], 64)
		if err1 != nil || err2 != nil {
			continue // the header
		}
		seg.Wave, seg.Flux = append(seg.Wave, wave), append(seg.Flux, flux)
		seg.Ivar = append(seg.Ivar, 1/(0.005*flux*0.005*flux)) // half a percent, as calibrated spectra have
	}
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	bench := chain.NewBench()
	out := bench.Process(&spectrum.Spectrum{RA: math.NaN(), Dec: math.NaN(), BaryVelocity: math.NaN(), Segments: []spectrum.Segment{seg}})
	if o := out.Object; o.Class != catalog.Star || math.Abs(o.Redshift) > 3e-4 {
		t.Fatalf("Vega is a %s (%s) at %.5f", o.Class, o.Family, o.Redshift)
	}
	found := map[string]catalog.Line{}
	for _, l := range out.Lines {
		found[l.Line] = l
		if l.Kind == "absorption" && (l.Line == "NII_6583" || l.Line == "NII_6548") {
			t.Errorf("[N II] %s in absorption, %.2f Angstrom", l.Line, l.EWRest)
		}
	}
	view := bench.View()
	compared := 0
	for _, row := range checkvalues.Rows(t, "../lines/testdata/vega_ew.csv") {
		if row[0] == "line" {
			continue
		}
		var v [2]float64 // center and half window
		for k := range v {
			if v[k], err = strconv.ParseFloat(row[k+1], 64); err != nil {
				t.Fatal(err)
			}
		}
		want, err := strconv.ParseFloat(row[len(row)-1], 64)
		if err != nil {
			t.Fatal(err)
		}
		direct := 0.0
		for i, x := range view.LogWave {
			if w := math.Pow(10, x); math.Abs(w-v[0]) < v[1] && view.Ivar[i] > 0 {
				direct += w * 1e-4 * math.Ln10 * (1 - view.Flux[i]/view.Continuum(x))
			}
		}
		l := found[row[0]]
		inside := 0.0
		s := 1.3677 * l.WidthKms / spectrum.SpeedOfLight * v[0]
		for x := -v[1]; x < v[1]; x += 0.1 {
			inside += 0.1 / (2.3963 * s) * math.Pow(1+x*x/(s*s), -1.25)
		}
		t.Logf("%s +-%.0f: table %.2f, direct on our continuum %.2f; fit %.2f +- %.2f, inside the window %.2f, sum %.2f", row[0], v[1], want, direct,
			l.EWRest, l.EWRestErr, inside*l.EWRest, l.EWSum)
		tol := 0.005 * 2 * v[1]
		if row[0] == "Hd" {
			tol *= 2
		}
		if math.Abs(direct-want) > tol {
			t.Errorf("%s +-%.0f: %.2f Angstrom on the chain's continuum, want %.2f +- %.2f", row[0], v[1], direct, want, tol)
		}
		if l.Kind != "absorption" || math.Abs(inside*l.EWRest/want-1) > 0.06 {
			t.Errorf("%s +-%.0f: %s of %.2f Angstrom, %.2f in the window, want %.2f", row[0], v[1], l.Kind, l.EWRest, inside*l.EWRest, want)
		}
		if math.Abs(l.EWSum/l.EWRest-1) > 0.03 {
			t.Errorf("%s: sum %.2f, fit %.2f", row[0], l.EWSum, l.EWRest)
		}
		compared++
	}
	if compared != 8 {
		t.Errorf("%d windows compared, want 8", compared)
	}
}
