package pipeline_test

import (
	"math"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// outflowing cuts a trough of the given depth between two velocities, km/s, blueward of a
// rest wavelength into a spectrum.
func outflowing(s *spectrum.Spectrum, z, line, from, to, depth float64) {
	seg := &s.Segments[0]
	for i, w := range seg.Wave {
		v := (1 - w/(line*(1+z))) * spectrum.SpeedOfLight
		seg.Flux[i] *= 1 - depth/((1+math.Exp((from-v)/300))*(1+math.Exp((v-to)/300)))
	}
}

// The continuum of a quasar does not dive into the troughs of its outflows: what is seen of it
// between and beside them is met within 5 %, the doubt that the power law is given, with or
// without troughs. Lines that the troughs leave keep their widths within 25 %, the share
// that a one-sided continuum of that doubt makes of 40 Angstrom (100 Angstrom of line, twice 5 %); those
// that they cut have none.
func TestContinuumAcrossTroughs(t *testing.T) {
	const z = 2.6
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	bench := chain.NewBench()
	for _, tc := range []struct {
		what     string
		from, to float64
		depth    float64
		cut      bool
	}{{"none", 0, 1, 0, false}, {"detached", 9000, 20000, 0.85, false}, {"attached", 3500, 13000, 0.85, true}} {
		var ew float64
		reasons := map[string]bool{}
		for seed := range uint64(4) {
			s := wideQuasar(z, map[float64]float64{1215.67: 80, 1240: 15, 1397: 9, 1549.5: 40, 1908.7: 25}, seed)
			outflowing(s, z, 1549.5, tc.from, tc.to, tc.depth)
			outflowing(s, z, 1397, tc.from, tc.to, tc.depth)
			out := bench.Process(s)
			if out.Object.Class != catalog.Quasar || math.Abs(out.Object.Redshift-z) > 0.03 {
				t.Fatalf("%s: %s at %.4f", tc.what, out.Object.Class, out.Object.Redshift)
			}
			v := bench.View()
			for _, rest := range []float64{1360, 1450, 1500, 1700} {
				w := rest * (1 + z)
				if r := v.Continuum(math.Log10(w)) / math.Pow(w/6000, -1.2); math.Abs(r-1) > 0.05 {
					t.Errorf("%s: continuum at %g is %.3f of the true one", tc.what, rest, r)
				}
			}
			for _, l := range out.Lines {
				if strings.HasPrefix(l.Line, "CIV_") {
					ew -= l.EWRest / 4
					reasons[l.Reason] = true
				}
			}
		}
		t.Logf("%s: C IV W %.1f of 40, reasons %v", tc.what, ew, reasons)
		if !tc.cut && math.Abs(ew/40-1) > 0.25 || tc.cut && !(math.IsNaN(ew) && reasons["masked"]) {
			t.Errorf("%s: C IV W %.1f of 40, reasons %v", tc.what, ew, reasons)
		}
	}
}

// Where the forest takes nearly all light, the continuum is that redward of Lyman alpha, within
// 10 %: it is extrapolated from 1275 to 1230 Angstrom; and nothing is measured in the forest.
// With half of the light left nothing changes.
func TestContinuumAtSaturatedForest(t *testing.T) {
	const z = 5.2
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	bench := chain.NewBench()
	for left, ends := range map[float64]bool{0.05: true, 0.5: false} {
		s := wideQuasar(z, map[float64]float64{1215.67: 60, 1240: 15, 1397: 9, 1549.5: 40}, 3)
		seg := &s.Segments[0]
		for i, w := range seg.Wave {
			if w < 1215.67*(1+z) {
				seg.Flux[i] *= left * (1 + math.Sin(float64(i)/5))
			}
		}
		out := bench.Process(s)
		if out.Object.Class != catalog.Quasar || math.Abs(out.Object.Redshift-z) > 0.05 {
			t.Fatalf("transmission %g: %s at %.4f, %s", left, out.Object.Class, out.Object.Redshift, out.Object.Reason)
		}
		v := bench.View()
		w := 1230 * (1 + z)
		if r := v.Continuum(math.Log10(w)) / math.Pow(w/6000, -1.2); ends && math.Abs(r-1) > 0.1 {
			t.Errorf("transmission %g: continuum at 1230 is %.3f of the true one", left, r)
		}
		if c := v.Continuum(math.Log10(1100 * (1 + z))); math.IsNaN(c) != ends {
			t.Errorf("transmission %g: continuum in the forest %g", left, c)
		}
		measured := 0
		for _, l := range out.Lines {
			if l.RestWave < 1250 && !math.IsNaN(l.EWRest) {
				measured++
			}
		}
		if (measured == 0) != ends {
			t.Errorf("transmission %g: %d lines measured below 1250 Angstrom", left, measured)
		}
	}
}
