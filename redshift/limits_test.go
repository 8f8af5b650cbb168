package redshift

import (
	"math"
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
	if res.Found || res.Reason == "" || !math.IsNaN(res.Redshift) {
		t.Errorf("%+v", res)
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
