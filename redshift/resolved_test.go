package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/spectrum"
)

// paintLines adds Gaussian lines to a grid, integrated over its pixels: rest
// wavelength and flux in units of the grid's times km/s.
func paintLines(g *spectrum.Grid, z, sigma float64, lines [][2]float64) {
	for _, line := range lines {
		for i := range g.Flux {
			lo := (g.LogWave(i) - 0.5*testStep - math.Log10(line[0]*(1+z))) * ln10 * speedOfLight
			hi := lo + kmsPixel
			if hi > -7*sigma && lo < 7*sigma {
				g.Flux[i] += line[1] / kmsPixel * 0.5 * (math.Erf(hi/sigma/math.Sqrt2) - math.Erf(lo/sigma/math.Sqrt2))
			}
		}
	}
}

// galaxyLines are of a star-forming galaxy; hydrogen by Case B. Hydrogen
// wavelengths of CHECKS, the others from memory.
var galaxyLines = [][2]float64{{3728.5, 400}, {4341.68, 90}, {4862.68, 200}, {4960.3, 130}, {5008.24, 400}, {6564.61, 600}, {6585.27, 150}}

func instrumentSigma(power float64) float64 { return speedOfLight / power / 2.3548200450309493 }

// Lines of an instrument of little or much resolution are described better by
// templates that know of it.
func TestResolved(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	const z = 0.2
	for _, power := range []float64{320, 800, 6000, 20000} {
		sigma := instrumentSigma(power)
		g := flatGrid()
		paintLines(g, z, math.Hypot(sigma, 60), fluxesTimes(galaxyLines, 4))
		plain := f.Find(g, s)
		fitted := f.Resolved(sigma).Find(g, s)
		// 3e-4 is 90 km/s, a quarter of the width at R = 320.
		if !fitted.Found || math.Abs(fitted.Redshift-z) > 3e-4 || fitted.Drop <= plain.Drop {
			t.Errorf("R = %g: z = %g, chi2 lower by %.0f; without %g, %.0f", power, fitted.Redshift, fitted.Drop, plain.Redshift, plain.Drop)
		}
	}
}

func TestResolvedWidths(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	half := kmsPixel / 2
	for _, sigma := range []float64{398, 159, 21, 6, 0} {
		for i, fam := range f.Resolved(sigma).Families() {
			for k, got := range fam.Widths {
				w := f.Families()[i].Widths[k]
				want := math.Sqrt(w*w + sigma*sigma - designSigma*designSigma)
				if math.Abs(got-want) > 1e-9*want || got < half {
					t.Errorf("sigma %g, %s: width %g, want %g", sigma, fam.Name, got, want)
				}
			}
		}
	}
	thin := newTestFinder(t, builtInFamilies(t))
	thin.families[0].Widths = []float64{65, 20}
	if got := thin.Resolved(1).Families()[0].Widths; math.Abs(got[0]-half) > 1e-9 || got[1] != 20 {
		t.Errorf("widths %g, want half a pixel, %g, and what was narrower before", got, half)
	}
	for _, sigma := range []float64{60, designSigma, 70, math.NaN()} {
		if f.Resolved(sigma) != f {
			t.Errorf("a sigma of %g changes the templates", sigma)
		}
	}
}

// Redshifts and their errors at all resolutions, of lines as narrow as in dwarfs
// (30 km/s) and as in giant galaxies (60 km/s), near the limit of detection: no
// bias, and no error understated.
func TestRedshiftsOfResolutions(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	const n = 40
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	for _, power := range []float64{800, 2000, 6000, 20000} {
		sigma := instrumentSigma(power)
		fitted := f.Resolved(sigma)
		for _, own := range []float64{30, 60} {
			r := rand.New(rand.NewPCG(3, uint64(power)))
			var right, sum, squares, pulls float64
			for range n {
				z := 0.1 + 0.3*r.Float64()
				g := flatGrid()
				for i := range g.Flux {
					g.Flux[i] = 10 + r.NormFloat64()
				}
				paintLines(g, z, math.Hypot(sigma, own), fluxesTimes(galaxyLines, 2.3)) // chi2 lower by 80 to 210
				res := fitted.Find(g, s)
				if v := (res.Redshift - z) / (1 + z) * speedOfLight; math.Abs(v) < 300 {
					right, sum, squares, pulls = right+1, sum+v, squares+v*v, pulls+math.Pow((res.Redshift-z)/res.RedshiftErr, 2)
				}
			}
			bias, scatter, pull := sum/right, math.Sqrt(squares/right), math.Sqrt(pulls/right)
			t.Logf("R %5.0f, lines of %2.0f km/s: %2.0f of %d right, bias %5.1f km/s, scatter %4.1f km/s, pulls %.2f", power, own, right, n, bias, scatter, pull)
			// Four in five: the faintest may be lost in the noise. Three standard errors of
			// the mean; the pulls of 32 have an error of 1/sqrt(2*32) = 0.125, three of them.
			if right < 0.8*n || math.Abs(bias) > 3*scatter/math.Sqrt(right) || pull > 1.38 {
				t.Errorf("R %g, lines of %g km/s: %.0f of %d right, bias %.1f +- %.1f km/s, pulls %.2f", power, own, right, n, bias, scatter/math.Sqrt(right), pull)
			}
		}
	}
}

func fluxesTimes(lines [][2]float64, by float64) [][2]float64 {
	out := make([][2]float64, len(lines))
	for i, l := range lines {
		out[i] = [2]float64{l[0], l[1] * by}
	}
	return out
}
