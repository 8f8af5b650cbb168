package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// water draws bands of water at their places, from memory of spectra that were not
// corrected, with edges and relative strengths that vary as between detectors,
// resolutions and corrections; most is the share of the light taken where it takes most.
func water(r *rand.Rand, g *spectrum.Grid, most float64, lined bool) []float64 {
	n := g.Len()
	out := make([]float64, n)
	for _, b := range []struct{ center, half, depth float64 }{{7250, 70, 0.6}, {8220, 90, 0.6}, {9050, 90, 0.6}, {9400, 170, 1}} {
		depth := most * b.depth * (0.7 + 0.6*r.Float64())
		center, half := b.center+10*r.NormFloat64(), b.half*(0.8+0.4*r.Float64())
		// Lines of many strengths, of which an instrument of R = 2000 sees the blend.
		lines := make([]float64, n)
		if lined {
			for range int(half) {
				at := (math.Log10(center+half*(2*r.Float64()-1)) - g.Start) / g.Step
				s := 1.5 * r.ExpFloat64()
				for i := max(0, int(at)-8); i < min(n, int(at)+9); i++ {
					lines[i] += gaussianAt(i, at, 64/kmsPixel, s)
				}
			}
		}
		for i := range out {
			v := math.Exp(-0.5 * math.Pow((pow10(g.LogWave(i))-center)/half, 4))
			if lined {
				v = 1 - math.Exp(-lines[i])
			}
			out[i] += depth * v
		}
	}
	return out
}

// A smooth continuum seen through water that was not corrected, or corrected by a little too much, has no
// redshift, whether or not its model keeps its promises or is tied, which would hide what the bands of water are for. The bound is 1 % of
// the spectra and two Poisson sigmas of that; without its bands of water
// the tool must make twice as many secure, or this water misleads nobody.
func TestContinuaBehindWaterAreNotSecure(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	const spectra = 320
	count := func(bands [][2]float64) (secure int) {
		opt := DefaultOptions()
		opt.WaterBands = bands
		finder, err := NewFinder(builtInFamilies(t), testStep, opt)
		if err != nil {
			t.Fatal(err)
		}
		scratch := finder.NewScratch()
		r := rand.New(rand.NewPCG(7, 9300))
		for k := range spectra {
			const n = 4500
			g := &spectrum.Grid{Start: 3.5563, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n), Independent: n}
			depth, slope, snr := 0.05+0.35*r.Float64(), -2+3*r.Float64(), math.Pow(10, 0.5+1.4*r.Float64())
			if k%4 == 3 {
				depth *= -0.15
			}
			for i, d := range water(r, g, depth, k%2 == 1) {
				c := math.Pow(10, slope*(g.LogWave(i)-3.78))
				g.Flux[i], g.Ivar[i] = c*(1-d)+r.NormFloat64()/snr, snr*snr
			}
			res := finder.Find(g, scratch)
			res.LinesMissing = res.StrongMissing()
			th := DefaultThresholds()
			th.TiedShare = 0
			th.Judge(&res)
			if res.Verdict == Secure {
				secure++
				if bands != nil {
					t.Logf("depth %.2f, S/N %.0f: %s at %.4f, gap %.1f, %d features", depth, snr, res.Family, res.Redshift, res.Gap, res.LinesSeen)
				}
			}
		}
		return secure
	}
	before, after := count(nil), count(DefaultOptions().WaterBands)
	t.Logf("of %d spectra %d come out secure, %d without bands of water", spectra, after, before)
	if after > 6 {
		t.Errorf("%d of %d continua behind water came out secure", after, spectra)
	}
	if before < 12 {
		t.Errorf("without bands of water %d of %d came out secure: this water misleads nobody", before, spectra)
	}
}

// The share that is left is measured: what the test put in, in the largest band times 0.6 for the
// weaker ones, and nothing in noise, beside a line of the object or across a break.
func TestWaterLeft(t *testing.T) {
	const n, snr = 4500, 30.0
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	for _, c := range []struct {
		name     string
		flux     func(wave float64) float64
		from, to float64
	}{
		{"a tenth of the light in each band", func(w float64) float64 {
			for _, b := range f.opt.WaterBands {
				if w > b[0] && w < b[1] {
					return 0.9
				}
			}
			return 1
			// 0.1/sqrt(1.323), as the third quartile is taken for that of a Gaussian, less noise.
		}, 0.075, 0.1},
		{"nothing", func(float64) float64 { return 1 }, 0, 0},
		{"a broad line in one band", func(w float64) float64 { return 1 + math.Exp(-0.5*(w-7250)*(w-7250)/3600) }, 0, 0.005},
		{"a break in one band, a line in the next", func(w float64) float64 {
			return 0.3 + 0.7/(1+math.Exp((8240-w)/10)) + 0.5*math.Exp(-0.5*(w-7250)*(w-7250)/3600)
		}, 0, 0.005},
		{"light on top in each band", func(w float64) float64 {
			for _, b := range f.opt.WaterBands {
				if w > b[0] && w < b[1] {
					return 1.1
				}
			}
			return 1
		}, 0, 0},
	} {
		r := rand.New(rand.NewPCG(1, 7))
		g := &spectrum.Grid{Start: 3.5563, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n)}
		for i := range n {
			g.Flux[i], g.Ivar[i] = c.flux(pow10(g.LogWave(i)))+r.NormFloat64()/snr, snr*snr
		}
		s.waterLeft(g, g.Flux, g.Ivar, f.opt.WaterBands)
		if s.left < c.from || s.left > c.to {
			t.Errorf("%s: %.4f of the light, want %g to %g", c.name, s.left, c.from, c.to)
		}
	}
}
