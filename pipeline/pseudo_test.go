package pipeline_test

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// wideQuasar is a power law with broad lines, sigma 3,000 km/s, each of the rest
// equivalent width given. S/N is 15 a pixel.
func wideQuasar(z float64, widths map[float64]float64, seed uint64) *spectrum.Spectrum {
	rng := rand.New(rand.NewPCG(seed, 3))
	var seg spectrum.Segment
	for x := math.Log10(3700); x < math.Log10(10000); x += 1e-4 {
		w := math.Pow(10, x)
		f, lines := math.Pow(w/6000, -1.2), 1.0
		for wave, ew := range widths {
			sigma := wave * 3000 / spectrum.SpeedOfLight
			u := (w/(1+z) - wave) / sigma
			lines += ew / (math.Sqrt(2*math.Pi) * sigma) * math.Exp(-u*u/2)
		}
		f *= lines
		seg.Wave, seg.Flux, seg.Ivar = append(seg.Wave, w), append(seg.Flux, f+f/15*rng.NormFloat64()), append(seg.Ivar, 225/(f*f))
	}
	return &spectrum.Spectrum{RA: math.NaN(), Dec: math.NaN(), BaryVelocity: math.NaN(), Segments: []spectrum.Segment{seg}}
}

// Broad lines of quasars keep their equivalent width: the continuum does not bend into
// them, nor into the light between C IV and the next lines, here a bump at 1660
// Angstrom; and no neighbor in reach takes a line over, as Al III and Si III] would C III].
// The bump lifts the continuum at 1620 Angstrom by 1 % and under C IV by half of that: 2 sqrt(pi) sigma
// of it are 0.7 % of the line, noise is as much in ten spectra. 5 % are what line tables are held to
// (linetables_test.go); without bridges C IV, Mg II and H-beta lose 5 to 8 %.
func TestBroadLinesOfQuasars(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	for _, tc := range []struct {
		z      float64
		widths map[float64]float64
		lines  map[string]float64 // prefix of the rows that add up
	}{
		{2.1, map[float64]float64{1549.5: 40, 1660: 8, 1908.7: 25, 2799: 35}, map[string]float64{"CIV_15": 40, "CIII_190": 25, "MgII_": 35}},
		{0.5, map[float64]float64{2799: 35, 4862.7: 60, 4341.7: 20}, map[string]float64{"MgII_": 35, "Hb": 60}},
	} {
		sums := map[string]float64{}
		for seed := range uint64(10) {
			out := worker.Process(wideQuasar(tc.z, tc.widths, seed))
			if out.Object.Class != catalog.Quasar || math.Abs(out.Object.Redshift-tc.z) > 0.02 {
				t.Fatalf("%s at %.4f, want a quasar at %g", out.Object.Class, out.Object.Redshift, tc.z)
			}
			for name := range tc.lines {
				for _, l := range out.Lines {
					if strings.HasPrefix(l.Line, name) && !math.IsNaN(l.EWRest) {
						sums[name] -= l.EWRest / 10
					}
				}
			}
		}
		for name, want := range tc.lines {
			t.Logf("z %g, %s: W %.2f of %g", tc.z, name, sums[name], want)
			if math.Abs(sums[name]/want-1) > 0.05 {
				t.Errorf("z %g, %s: W %.2f, want %g +- 5 %%", tc.z, name, sums[name], want)
			}
		}
	}
}
