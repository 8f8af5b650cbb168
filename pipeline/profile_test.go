package pipeline_test

import (
	"math"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// skewed is a galaxy at z = 0.1 whose [O III] and H-alpha have a Gauss-Hermite h3 of 0.1
// (van der Marel & Franx 1993), sigma 200 km/s, on a flat continuum of 10 with
// errors of 0.1.
func skewed() *spectrum.Spectrum {
	var seg spectrum.Segment
	for x := math.Log10(3800); x < math.Log10(9000); x += 1e-4 {
		w := math.Pow(10, x)
		f := 10.0
		for _, l := range []struct{ wave, flux float64 }{
			{3728.5, 100}, {4862.69, 100}, {4960.295, 100}, {5008.24, 298}, {6564.61, 290}, {6549.86, 33}, {6585.27, 100}, {6718.29, 60}, {6732.67, 50},
		} {
			mu := l.wave * 1.1
			s := mu * 200 / spectrum.SpeedOfLight
			u := (w - mu) / s
			f += l.flux / (math.Sqrt(2*math.Pi) * s) * math.Exp(-u*u/2) * (1 + 0.1*(2*math.Sqrt2*u*u*u-3*math.Sqrt2*u)/math.Sqrt(6))
		}
		// Noise that every run repeats: a sine of no period.
		f += 0.14 * math.Sin(1e7*x*x)
		seg.Wave, seg.Flux, seg.Ivar = append(seg.Wave, w), append(seg.Flux, f), append(seg.Ivar, 100)
	}
	return &spectrum.Spectrum{RA: math.NaN(), Dec: math.NaN(), BaryVelocity: math.NaN(), Segments: []spectrum.Segment{seg}}
}

// The setting lines.profile reaches the catalog: h3 and h4, or a Lorentzian width,
// stand where they were asked for and nowhere else.
func TestProfileSetting(t *testing.T) {
	for _, profile := range []string{"gaussian", "gauss-hermite", "voigt"} {
		set := pipeline.DefaultSettings()
		set.Lines.Profile = profile
		chain, err := pipeline.NewChain(set)
		if err != nil {
			t.Fatal(err)
		}
		out := chain.NewWorker().Process(skewed())
		var line catalog.Line
		for _, l := range out.Lines {
			if l.Line == "OIII_5007" {
				line = l
			}
		}
		t.Logf("%s at %.4f, %s: W %.2f +- %.2f, h3 %.3f +- %.3f, h4 %.3f +- %.3f, Lorentzian %.1f +- %.1f", out.Object.Class, out.Object.Redshift, profile,
			line.EWRest, line.EWRestErr, line.H3, line.H3Err, line.H4, line.H4Err, line.LorentzKms, line.LorentzErr)
		hermite, voigt := profile == "gauss-hermite", profile == "voigt"
		for _, v := range []float64{line.H3, line.H3Err, line.H4, line.H4Err} {
			if math.IsNaN(v) == hermite {
				t.Errorf("%s: h3, h4 are %v", profile, []float64{line.H3, line.H3Err, line.H4, line.H4Err})
				break
			}
		}
		if math.IsNaN(line.LorentzKms) == voigt {
			t.Errorf("%s: Lorentzian of %g km/s", profile, line.LorentzKms)
		}
		if hermite && (math.Abs(line.H3-0.1) > 4*line.H3Err || math.Abs(line.H4) > 4*line.H4Err || !(line.H3Err < 0.02)) {
			t.Errorf("h3 %.3f +- %.3f, want 0.1; h4 %.3f +- %.3f, want 0", line.H3, line.H3Err, line.H4, line.H4Err)
		}
		// 298 / 10 / 1.1; a Gaussian misses part of a skewed line.
		if want := -27.09; math.Abs(line.EWRest-want) > 4*line.EWRestErr+0.02*math.Abs(want) {
			t.Errorf("%s: W = %.2f +- %.2f, want %.2f", profile, line.EWRest, line.EWRestErr, want)
		}
	}
}
