package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

func TestWithin(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	in := f.Within(spectrum.Limits{Class: "galaxy", ZMin: 0.3, ZMax: math.NaN()})
	if len(in.Families()) == 0 || len(in.Families()) >= len(f.Families()) {
		t.Fatalf("%d families of %d", len(in.Families()), len(f.Families()))
	}
	for _, fam := range in.Families() {
		if fam.Class != "galaxy" || fam.ZMin < 0.3 || fam.ZMax < fam.ZMin {
			t.Errorf("%s, a %s, from %g to %g", fam.Name, fam.Class, fam.ZMin, fam.ZMax)
		}
	}
	for _, fam := range f.Families() {
		if fam.Class == "galaxy" && fam.ZMin > 0.1 && fam.ZMax < 1 {
			t.Errorf("%s was changed by the limits of another", fam.Name)
		}
	}
	if all := f.Within(spectrum.Limits{ZMin: math.NaN(), ZMax: math.NaN()}); len(all.Families()) != len(f.Families()) {
		t.Error("no limits took families away")
	}
	// Nothing in the recipes lies beyond z = 15.
	none := f.Within(spectrum.Limits{ZMin: 15, ZMax: 16})
	res := none.Find(flatGrid(), none.NewScratch())
	if res.Found || !math.IsNaN(res.Redshift) || res.Reason != "no template family reaches into the range of redshift that is left" {
		t.Errorf("%+v", res)
	}
}

// Why nothing is found is said as it is: no feature in the coverage, or none that the
// spectrum has.
func TestNothingFoundIsExplained(t *testing.T) {
	line := func(wave float64) *Family {
		return &Family{Name: "line", Class: "galaxy", ZMin: 0, ZMax: 0.01, Widths: []float64{100},
			components: []component{{name: "line", scale: 1, terms: []term{{name: "line", logWave: math.Log10(wave), amp: 1}}}}}
	}
	g := flatGrid() // 3600 to 9042 Angstrom
	for i := range g.Flux {
		u := (g.LogWave(i) - math.Log10(6000)) / (3 * testStep)
		g.Flux[i] -= 9 * math.Exp(-0.5*u*u) // an emission line describes nothing here
	}
	for _, c := range []struct {
		wave float64
		want string
	}{
		{12000, "no template family has a feature inside the coverage"},
		{5970, "no template family describes the spectrum better than its continuum alone"},
	} {
		f := newTestFinder(t, []*Family{line(c.wave)})
		if res := f.Find(g, f.NewScratch()); res.Found || res.Reason != c.want {
			t.Errorf("a line at %g Angstrom: found %v, %q, want %q", c.wave, res.Found, res.Reason, c.want)
		}
	}
}

// Drop weighs answers of searches within limits and without on the same pixels. The
// weights of a search are lowered where none of its own answers describe the data, so that the drop
// it states itself is another. The free answer is the best on the weights of the free search.
func TestDropOnTheSameWeights(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	for seed := range uint64(4) {
		g := emissionLines(t, rand.New(rand.NewPCG(seed, 1)), 0.2, 90, 20)
		in := f.Within(spectrum.Limits{ZMin: 0.5, ZMax: 0.9}).Find(g, s)
		free := f.Find(g, s)
		own, other := f.Drop(s, &free), f.Drop(s, &in)
		// The winner was refined after its drop was taken; what is left of a step is below a hundredth.
		if math.Abs(own/free.Drop-1) > 0.01 {
			t.Errorf("the winner lowers chi^2 by %.1f, now by %.1f", free.Drop, own)
		}
		// By hand: the tempered weights of the free search, chi^2 without and with the model.
		best := 0.0
		for _, fam := range f.families {
			if fam.Name != in.Family {
				continue
			}
			fit := s.bench.evaluate(&s.full, fam, in.Width, math.Log10(1+in.Redshift))
			resid := make([]float64, s.full.n)
			s.bench.residual(resid, &s.full, &fit)
			for i, w := range s.full.weight {
				best += w * (s.full.resid[i]*s.full.resid[i] - resid[i]*resid[i])
			}
		}
		// The prior of the spline takes part in the drop but not in this sum.
		if math.Abs(best-other) > 0.05*own {
			t.Errorf("the answer within limits lowers chi^2 by %.1f, by hand %.1f", other, best)
		}
		if other >= own {
			t.Errorf("within limits %.1f, without %.1f", other, own)
		}
		if math.Abs(other-in.Drop) < 18.4 {
			t.Errorf("both weights give %.1f and %.1f: nothing is tested", other, in.Drop)
		}
	}
	if got := f.Drop(s, &Result{}); got != 0 {
		t.Errorf("%g where nothing was found", got)
	}
}

// flatGrid is a spectrum of flux 10 with unit errors.
func flatGrid() *spectrum.Grid {
	g := blank(4000)
	for i := range g.Flux {
		g.Flux[i] = 10
	}
	return g
}

// A line at 6000 Angstrom is found at the redshift that the limits leave to it.
func TestFindWithin(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	g := flatGrid()
	const z = 0.2
	for _, line := range []struct{ rest, peak float64 }{{3727.1, 20}, {3729.9, 25}, {4862.68, 20}, {4960.3, 20}, {5008.24, 60}} { // hydrogen of CHECKS, [O II] and [O III] from memory
		for i := range g.Flux {
			u := (g.LogWave(i) - math.Log10(line.rest*(1+z))) / (2 * testStep)
			g.Flux[i] += line.peak * math.Exp(-0.5*u*u)
		}
	}
	s := f.NewScratch()
	// 2e-4 is three pixels.
	if res := f.Find(g, s); math.Abs(res.Redshift-z) > 2e-4 {
		t.Fatalf("without limits z = %g", res.Redshift)
	}
	in := f.Within(spectrum.Limits{ZMin: 0.5, ZMax: 0.9})
	if res := in.Find(g, s); res.Redshift < 0.499 || res.Redshift > 0.901 {
		t.Errorf("between 0.5 and 0.9 z = %g", res.Redshift)
	}
	if res := f.Find(g, s); math.Abs(res.Redshift-z) > 2e-4 {
		t.Errorf("afterwards z = %g", res.Redshift)
	}
}
