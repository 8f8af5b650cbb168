package redshift

import (
	"math"
	"testing"
)

// Lines spread by an instrument of R = 320, a sigma of 398 km/s, are described
// better by templates that know of it, and not at all worse by ones that need not.
func TestResolved(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	const z, sigma = 0.2, 398.0
	g := flatGrid()
	for _, line := range []struct{ rest, peak float64 }{{3728.5, 4}, {4862.68, 3}, {5008.24, 8}, {6564.61, 9}} { // hydrogen of CHECKS, the others from memory
		for i := range g.Flux {
			u := (g.LogWave(i) - math.Log10(line.rest*(1+z))) * ln10 * speedOfLight / math.Hypot(sigma, 90)
			g.Flux[i] += line.peak * math.Exp(-0.5*u*u)
		}
	}
	s := f.NewScratch()
	narrow := f.Find(g, s)
	wide := f.Resolved(sigma).Find(g, s)
	// 3e-4 is 90 km/s, a quarter of the width.
	if !wide.Found || math.Abs(wide.Redshift-z) > 3e-4 || wide.Drop <= narrow.Drop {
		t.Errorf("z = %g, chi2 lower by %.0f; without %g, %.0f", wide.Redshift, wide.Drop, narrow.Redshift, narrow.Drop)
	}
	for i, fam := range f.Resolved(sigma).Families() {
		for k, w := range fam.Widths {
			want := math.Sqrt(f.Families()[i].Widths[k]*f.Families()[i].Widths[k] + sigma*sigma - designSigma*designSigma)
			if math.Abs(w-want) > 1e-9*want {
				t.Errorf("%s: width %g, want %g", fam.Name, w, want)
			}
		}
	}
	for _, sigma := range []float64{10, designSigma, math.NaN()} {
		if f.Resolved(sigma) != f {
			t.Errorf("a sigma of %g changes the templates", sigma)
		}
	}
}
