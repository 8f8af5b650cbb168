package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"duskline/spectrum"
	"duskline/synth"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// synthetic returns n spectra of the synthetic survey on grids, prepared as
// the pipeline does, with their truth.
func synthetic(seed uint64, n int) ([]*spectrum.Grid, []synth.Truth) {
	spectra, truth := synth.Spectra(seed, n)
	gr := spectrum.Gridder{Step: testStep, MinWave: 900, MaxWave: 26000}
	grids := make([]*spectrum.Grid, n)
	for i, s := range spectra {
		s.MaskSpikes(8)
		grids[i] = &spectrum.Grid{}
		gr.Grid(grids[i], s)
	}
	return grids, truth
}

func velocity(z, truth float64) float64 { return speedOfLight * math.Abs(z-truth) / (1 + truth) }

// Synthetic spectra made by other code. Over 26 x 64 others (seeds 100 to 125)
// 906 of 925 redshifts at S/N >= 3 were right, 97.9 %, and 1 of 1151 secure
// ones wrong.
func TestFindSynthetic(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	var bright, right, secure, secureWrong int
	for seed := uint64(1); seed <= 4; seed++ {
		grids, truth := synthetic(seed, 64)
		for i, g := range grids {
			r := f.Find(g, s)
			DefaultThresholds().Judge(&r)
			if truth[i].Class == synth.Sky {
				if r.Verdict == Secure {
					t.Errorf("seed %d, spectrum %d: blank sky is secure at z = %.4f", seed, i, r.Redshift)
				}
				continue
			}
			ok := velocity(r.Redshift, truth[i].Redshift) <= synth.Tolerance(truth[i].Class)
			if r.Verdict == Secure {
				secure++
				if !ok {
					secureWrong++
					t.Logf("secure and wrong: seed %d, spectrum %d, %s at z = %.4f: %s at %.4f", seed, i, truth[i].Kind, truth[i].Redshift, r.Family, r.Redshift)
				}
			}
			if truth[i].SNR >= 3 {
				bright++
				if ok {
					right++
				} else {
					t.Logf("wrong: seed %d, spectrum %d, %s at z = %.4f, S/N %.1f: %s at %.4f, gap %.1f", seed, i, truth[i].Kind, truth[i].Redshift, truth[i].SNR, r.Family, r.Redshift, r.Gap)
				}
			}
		}
	}
	t.Logf("right %d of %d at S/N >= 3, secure %d, of them wrong %d", right, bright, secure, secureWrong)
	// Three standard deviations of a binomial below 97.9 %.
	const p = 0.979
	n := float64(bright)
	if least := n*p - 3*math.Sqrt(n*p*(1-p)); bright < 100 || float64(right) < least {
		t.Errorf("%d of %d right at S/N >= 3, want at least %.0f", right, bright, least)
	}
	// Expected 0.15; two or more have a chance of 1 %.
	if secure < 150 || secureWrong > 1 {
		t.Errorf("%d of %d secure redshifts are wrong", secureWrong, secure)
	}
}

// emissionLines draws an emission-line galaxy of known redshift on a flat
// continuum of 5 with noise of 1. Height is the peak of H beta.
func emissionLines(t testing.TB, r *rand.Rand, z, width, height float64) *spectrum.Grid {
	t.Helper()
	list := builtInLines(t)
	g := blank(4600)
	var d drawing
	d.reset(g.Len())
	for _, l := range []struct {
		name  string
		ratio float64
	}{{"Ha", 2.86}, {"Hb", 1}, {"Hg", 0.47}, {"OIII_5007", 1}, {"OIII_4959", 0.34}, {"OII_3726", 1}, {"OII_3729", 1.2}, {"NII_6583", 0.6}, {"NII_6548", 0.2}} {
		line, ok := list.Find(l.name)
		if !ok {
			t.Fatalf("no line %s", l.name)
		}
		gaussian(&d, g.Len(), (math.Log10(line.Wave*(1+z))-g.Start)/g.Step, width/kmsPixel, height*l.ratio)
	}
	for i := range g.Flux {
		g.Flux[i] = 5 + d.values[i] + r.NormFloat64()
	}
	return g
}

// The error of a redshift is the scatter about the truth where the template
// describes the data, at high and low signal; the family's floor only widens.
func TestRedshiftErrorPulls(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	_, texts := builtInRecipes(t)
	text := string(texts["emission.toml"])
	bare := strings.Replace(text, "floor_kms = 9.0", "floor_kms = 0.0", 1)
	if bare == text {
		t.Fatal("the floor of the emission family is no longer 9 km/s")
	}
	const n = 150
	for _, c := range []struct {
		recipe        string
		width, height float64
	}{{bare, 90, 3}, {bare, 200, 3}, {bare, 90, 40}, {text, 200, 10}} {
		family, err := ParseRecipe("emission.toml", []byte(c.recipe), builtInLines(t))
		if err != nil {
			t.Fatal(err)
		}
		f := newTestFinder(t, []*Family{family})
		s := f.NewScratch()
		r := rand.New(rand.NewPCG(1, 1))
		sum, square := 0.0, 0.0
		for range n {
			z := 0.05 + 0.3*r.Float64()
			res := f.Find(emissionLines(t, r, z, c.width, c.height), s)
			pull := (res.Redshift - z) / res.RedshiftErr
			if !(math.Abs(pull) < 6) {
				t.Fatalf("z = %.5f found as %.5f with an error of %.5f", z, res.Redshift, res.RedshiftErr)
			}
			sum += pull
			square += pull * pull
		}
		// The rms of 150 pulls is known to 1/sqrt(300), 5.8 %, their mean to
		// 8.2 %; four of each.
		mean, rms := sum/n, math.Sqrt(square/n)
		t.Logf("floor %.0f km/s, lines of %g km/s and height %g: pulls %.3f, rms %.3f", family.floor, c.width, c.height, mean, rms)
		if math.Abs(mean) > 4*0.082 {
			t.Errorf("lines of %g km/s, height %g: the mean pull is %.3f", c.width, c.height, mean)
		}
		if least := map[bool]float64{true: 1 - 4*0.058, false: 0}[family.floor == 0]; rms < least || rms > 1+4*0.058 {
			t.Errorf("lines of %g km/s, height %g: the rms of the pulls is %.3f", c.width, c.height, rms)
		}
	}
}

// Noise is never secure, whatever its level, whether it rides on a smooth
// continuum, came from pixels three times as wide, or has errors stated wrong
// by a factor of two.
func TestFindNoiseIsNeverSecure(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	gr := spectrum.Gridder{Step: testStep, MinWave: 900, MaxWave: 26000}
	var g spectrum.Grid
	honest, none := 0, 0
	for seed := range uint64(300) {
		r := rand.New(rand.NewPCG(seed, 77))
		sigma := []float64{1e-17, 1, 30}[r.IntN(3)]
		level := []float64{0, 0.5, 5, 30}[r.IntN(4)]
		stated := []float64{1, 1, 0.5, 2}[r.IntN(4)]
		pixel := []float64{1, 1, 3}[r.IntN(3)]
		tilt, phase := 0.3*math.Tanh(r.NormFloat64()), 6*r.Float64()
		var seg spectrum.Segment
		for at := 0.0; at < 4600; at += pixel {
			x := 2*at/4600 - 1
			seg.Wave = append(seg.Wave, 3600*math.Pow(10, at*testStep))
			seg.Flux = append(seg.Flux, sigma*(level*(1+tilt*x+0.1*math.Sin(2*x+phase))+r.NormFloat64()))
			seg.Ivar = append(seg.Ivar, 1/(stated*stated*sigma*sigma))
		}
		gr.Grid(&g, &spectrum.Spectrum{Segments: []spectrum.Segment{seg}})
		res := f.Find(&g, s)
		DefaultThresholds().Judge(&res)
		if res.Verdict == Secure {
			t.Errorf("seed %d, noise %g stated as %g, continuum %g sigma, pixels of %g: secure, %s at z = %.4f, gap %.1f, %d features",
				seed, sigma, stated*sigma, level, pixel, res.Family, res.Redshift, res.Gap, res.LinesSeen)
		}
		if stated == 1 {
			honest++
			if res.Verdict == None {
				none++
			}
		}
	}
	// Most noise must not even be worth a look: 85 % has no redshift at all.
	t.Logf("no redshift for %d of %d with true errors", none, honest)
	if 10*none < 7*honest {
		t.Errorf("only %d of %d spectra of noise with true errors have no redshift", none, honest)
	}
}

// same compares results; NaN equals NaN.
func same(a, b Result, tolerance float64) string {
	return cmp.Diff(a, b, cmpopts.EquateApprox(tolerance, tolerance), cmpopts.EquateNaNs())
}

func scaled(g *spectrum.Grid, factor float64) *spectrum.Grid {
	out := &spectrum.Grid{Start: g.Start, Step: g.Step}
	for i := range g.Flux {
		out.Flux = append(out.Flux, g.Flux[i]*factor)
		out.Ivar = append(out.Ivar, g.Ivar[i]/factor/factor)
	}
	return out
}

// The unit of the flux changes nothing: powers of two not a bit, others by
// rounding, which refinement below the pixel amplifies.
func TestFindScaling(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	grids, _ := synthetic(5, 12)
	for i, g := range grids {
		want := f.Find(g, s)
		for _, c := range []struct{ factor, tolerance float64 }{{0x1p-56, 0}, {0x1p17, 0}, {1e-17, 1e-6}, {1e5, 1e-6}} {
			if diff := same(want, f.Find(scaled(g, c.factor), s), c.tolerance); diff != "" {
				t.Errorf("spectrum %d times %g:\n%s", i, c.factor, diff)
			}
		}
	}
}

// A scratch carries nothing over: any order of spectra gives what fresh ones
// give, and the spectra stay as they are.
func TestFindIsPure(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	grids, _ := synthetic(6, 16)
	// Other lengths and places among them, and spectra that end early.
	cut := &spectrum.Grid{Start: grids[0].LogWave(700), Step: testStep, Flux: grids[0].Flux[700:1900], Ivar: grids[0].Ivar[700:1900]}
	grids = append(grids, cut, blank(0), blank(150), blank(5000))
	var fresh []Result
	for _, g := range grids {
		flux, ivar := slices.Clone(g.Flux), slices.Clone(g.Ivar)
		fresh = append(fresh, f.Find(g, f.NewScratch()))
		for i := range flux {
			if ivar[i] != g.Ivar[i] || flux[i] != g.Flux[i] && !math.IsNaN(flux[i]) {
				t.Fatalf("pixel %d of the input changed", i)
			}
		}
	}
	s := f.NewScratch()
	r := rand.New(rand.NewPCG(3, 1))
	for range 3 {
		for _, i := range r.Perm(len(grids)) {
			if diff := same(fresh[i], f.Find(grids[i], s), 0); diff != "" {
				t.Fatalf("spectrum %d with a used scratch:\n%s", i, diff)
			}
		}
	}
}

// What a Find allocates once its buffers are there: the lines of the result
// (append grows them in some steps) and the count of peaks by family.
func TestFindAllocations(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	grids, _ := synthetic(7, 8)
	for _, g := range grids {
		f.Find(g, s)
	}
	i := 0
	if n := testing.AllocsPerRun(len(grids), func() {
		f.Find(grids[i%len(grids)], s)
		i++
	}); n > 16 {
		t.Errorf("%g allocations a spectrum, want at most 16", n)
	}
}

func BenchmarkFind(b *testing.B) {
	f := newTestFinder(b, builtInFamilies(b))
	s := f.NewScratch()
	grids, _ := synthetic(1, 64)
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		f.Find(grids[i%len(grids)], s)
	}
}
