package redshift

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"duskline/spectrum"

	"pgregory.net/rapid"
)

// checkResult holds what every result promises.
func checkResult(fail func(format string, args ...any), f *Finder, r *Result) {
	DefaultThresholds().Judge(r)
	if !(r.Confidence >= 0 && r.Confidence <= 1) {
		fail("confidence %g", r.Confidence)
	}
	if !r.Found {
		if r.Reason == "" || r.Verdict != None || !math.IsNaN(r.Redshift) {
			fail("not found, reason %q, verdict %v, redshift %g", r.Reason, r.Verdict, r.Redshift)
		}
		return
	}
	if r.Reason != "" {
		fail("found, with the reason %q why not", r.Reason)
	}
	known := false
	for _, fam := range f.Families() {
		if fam.Name == r.Family {
			// The ends of the range, in log10, come back rounded.
			known = r.Redshift >= fam.ZMin-1e-9 && r.Redshift <= fam.ZMax+1e-9
		}
	}
	if !known {
		fail("family %q at redshift %g", r.Family, r.Redshift)
	}
	if !(r.Gap >= 0) || !(r.Drop >= 0) || !(r.Chi2Dof >= 0) || !(r.RStat >= 0) {
		fail("gap %g, drop %g, chi^2 %g, r %g", r.Gap, r.Drop, r.Chi2Dof, r.RStat)
	}
	for _, l := range r.Lines {
		if math.IsNaN(l.SNR) || math.IsNaN(l.Model) || !(l.Wave > 0) || !(l.Width > 0) {
			fail("line %+v", l)
		}
	}
}

func TestFindDegenerate(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	r := rand.New(rand.NewPCG(8, 8))
	noise := func(n int) *spectrum.Grid {
		g := blank(n)
		for i := range g.Flux {
			g.Flux[i] = 3 + r.NormFloat64()
		}
		return g
	}
	change := func(g *spectrum.Grid, each func(i int)) *spectrum.Grid {
		for i := range g.Flux {
			each(i)
		}
		return g
	}
	oneGood, gap, negative, sky, dark := noise(3000), noise(4600), noise(3000), noise(3000), blank(3000)
	for _, c := range []struct {
		name   string
		g      *spectrum.Grid
		reason string // "" where an answer of any kind is right
		few    bool
	}{
		{"no pixels", blank(0), "too few usable pixels", true},
		{"one pixel", noise(1), "too few usable pixels", true},
		{"199 pixels", noise(199), "too few usable pixels", true},
		{"200 pixels", noise(200), "", false},
		{"one good pixel", change(oneGood, func(i int) {
			if i != 1500 {
				oneGood.Ivar[i] = 0
			}
		}), "too few usable pixels", true},
		{"zero flux", dark, "flux is zero everywhere", false},
		{"a gap of most of the spectrum", change(gap, func(i int) {
			if i > 120 && i < 4480 {
				gap.Ivar[i], gap.Flux[i] = 0, math.NaN()
			}
		}), "", false},
		{"negative flux", change(negative, func(i int) { negative.Flux[i] -= 50 }), "", false},
		{"all of it on the night-sky line", change(sky, func(i int) {
			if w := math.Pow(10, sky.LogWave(i)); w < 5566 || w > 5589 {
				sky.Ivar[i] = 0
			}
		}), "too few", true},
	} {
		res := f.Find(c.g, s)
		checkResult(func(format string, args ...any) { t.Errorf(c.name+": "+format, args...) }, f, &res)
		if c.reason == "" {
			continue
		}
		if res.Found || !strings.Contains(res.Reason, c.reason) || res.FewPixels != c.few {
			t.Errorf("%s: found %v, reason %q, few pixels %v, want %q, %v", c.name, res.Found, res.Reason, res.FewPixels, c.reason, c.few)
		}
	}
	if res := f.Find(negative, s); !res.BelowZero {
		t.Error("a continuum below zero is not told")
	}
}

// Whatever finite numbers a grid holds, Find answers or says why not.
func TestFindAnyGrid(t *testing.T) {
	opt := DefaultOptions()
	opt.MinPixels = 20
	f, err := NewFinder(builtInFamilies(t), testStep, opt)
	if err != nil {
		t.Fatal(err)
	}
	s := f.NewScratch()
	fluxes := []float64{0, 1, -1, 1e-17, 1e5, 1e-300, -1e-160, 1e160, 1e300, -1e300, 5e-324}
	weights := []float64{0, 1, 1, 1e-34, 1e34, 1e-300, 1e300, 5e-324}
	rapid.Check(t, func(t *rapid.T) {
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 2))
		n := rapid.IntRange(0, 1200).Draw(t, "pixels")
		g := blank(n)
		g.Start = rapid.Float64Range(2.95, 4.2).Draw(t, "start")
		base := rapid.SampledFrom(fluxes).Draw(t, "flux")
		noise := rapid.SampledFrom(fluxes).Draw(t, "noise")
		odd := rapid.SampledFrom(fluxes).Draw(t, "odd flux")
		weight := rapid.SampledFrom(weights).Draw(t, "weight")
		rarely := rapid.SampledFrom(weights).Draw(t, "odd weight")
		share := rapid.Float64Range(0, 1).Draw(t, "share")
		hole := rapid.IntRange(0, 1200).Draw(t, "hole")
		for i := range n {
			g.Flux[i], g.Ivar[i] = base+noise*r.NormFloat64(), weight
			if r.Float64() < share*share {
				g.Flux[i] = odd
			}
			if r.Float64() < share*share {
				g.Ivar[i] = rarely
			}
			if i > 60 && i < hole {
				g.Ivar[i] = 0
			}
			if math.IsInf(g.Flux[i], 0) {
				g.Ivar[i] = 0
			}
		}
		res := f.Find(g, s)
		checkResult(t.Fatalf, f, &res)
	})
}
