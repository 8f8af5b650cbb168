package pipeline_test

import (
	"math"
	"path/filepath"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/hydrogen"
	"duskline/internal/outside"
	"duskline/pipeline"
	"duskline/spectrum"
	"duskline/synth"
)

// dimmed multiplies exp(-tau) of a rest wavelength into a spectrum, a Gaussian line of
// optical depth tau0 at its center and sigma in km/s at redshift z.
func dimmed(s *spectrum.Spectrum, wave, z, tau0, sigma float64) {
	for k := range s.Segments {
		g := &s.Segments[k]
		for i, w := range g.Wave {
			if v := spectrum.SpeedOfLight * math.Log(w/wave/(1+z)); math.Abs(v) < 6*sigma {
				g.Flux[i] *= math.Exp(-tau0 * math.Exp(-0.5*v*v/(sigma*sigma)))
			}
		}
	}
}

// reach returns the first and last wavelength of a spectrum.
func reach(s *spectrum.Spectrum) (blue, red float64) {
	blue = math.Inf(1)
	for k := range s.Segments {
		w := s.Segments[k].Wave
		blue, red = min(blue, w[0]), max(red, w[len(w)-1])
	}
	return blue, red
}

// A Mg II doublet painted in front of synthetic galaxies reaches the rows of the
// absorber table through the whole chain; without it there are no such rows.
func TestDoubletBeforeGalaxyInChain(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	var spectra []*spectrum.Spectrum
	var truth []synth.Truth
	for seed := range uint64(4) {
		s, tr := synth.Spectra(seed, 64) // the same objects come back in the next 64
		spectra, truth = append(spectra, s...), append(truth, tr...)
	}
	// Optical depths of 2 and 1 in sigma 110 km/s: integrals of 1 - exp(-tau) over v.
	const sigma, tau0 = 110.0, 2.0
	width := func(tau0, wave float64) (w float64) {
		for v := -700.0; v < 700; v++ {
			w -= math.Expm1(-tau0*math.Exp(-0.5*v*v/(sigma*sigma))) * wave / spectrum.SpeedOfLight
		}
		return w
	}
	strong, weak := width(tau0, 2796.352), width(tau0/2, 2803.531)
	tried, found, bare := 0, 0, 0
	for i, s := range spectra {
		blue, red := reach(s)
		z := (0.5*(blue+min(red, 2780*(1+truth[i].Redshift))))/2796.352 - 1
		if truth[i].Class != catalog.Galaxy || truth[i].SNR < 5 || 2796*(1+z) < 1.03*blue || (1+z)*1.012 > 1+truth[i].Redshift {
			continue
		}
		painted := cloned(s)
		for k := range painted.Segments {
			painted.Segments[k].Flux = append([]float64(nil), s.Segments[k].Flux...)
		}
		dimmed(painted, 2796.352, z, tau0, sigma)
		dimmed(painted, 2803.531, z, tau0/2, sigma)
		clear := worker.Process(cloned(s))
		out := worker.Process(painted)
		bare += len(clear.Absorbers)
		if v := spectrum.SpeedOfLight * math.Abs(out.Object.Redshift-truth[i].Redshift) / (1 + truth[i].Redshift); out.Object.Class != catalog.Galaxy || v > 1000 {
			continue // not about absorbers
		}
		tried++
		for _, a := range out.Absorbers {
			if a.Kind != "MgII" || spectrum.SpeedOfLight*math.Abs(a.ZAbs-z)/(1+z) > 100 {
				continue
			}
			found++
			t.Logf("galaxy at %.3f, S/N %.1f: Mg II at %.4f for %.4f, W %.2f +- %.2f and %.2f +- %.2f for %.2f and %.2f", truth[i].Redshift, truth[i].SNR, a.ZAbs, z,
				a.EWRest, a.EWRestErr, a.EWSecond, a.EWSecondErr, strong, weak)
			if math.Abs(a.EWRest-strong) > 4*a.EWRestErr || math.Abs(a.EWSecond-weak) > 4*a.EWSecondErr {
				t.Errorf("W %.2f +- %.2f and %.2f +- %.2f, painted %.2f and %.2f", a.EWRest, a.EWRestErr, a.EWSecond, a.EWSecondErr, strong, weak)
			}
		}
	}
	t.Logf("%d of %d painted doublets in the rows, %d rows without", found, tried, bare)
	if tried < 5 || float64(found) < 0.7*float64(tried) || bare > 1 {
		t.Errorf("%d of %d painted doublets in the rows, %d rows without", found, tried, bare)
	}
}

// Damped hydrogen painted in front of synthetic galaxies of high redshift reaches the
// table as well; without it there is none.
func TestHydrogenBeforeGalaxyInChain(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	var series []hydrogen.AbsorptionLine
	for upper := 2; upper < 7; upper++ {
		transition, err := hydrogen.NewTransition(1, upper)
		if err != nil {
			t.Fatal(err)
		}
		series = append(series, transition.Absorption())
	}
	const logN = 21.0
	tried, found, bare := 0, 0, 0
	for seed := range uint64(8) {
		spectra, truth := synth.Spectra(seed, 64)
		for i, s := range spectra {
			blue, _ := reach(s)
			z := 0.93*(1+truth[i].Redshift) - 1
			if truth[i].Class != catalog.Galaxy || truth[i].SNR < 3 || 1215.67*(1+z) < 1.05*blue {
				continue
			}
			painted := cloned(s)
			for k := range painted.Segments {
				g := &painted.Segments[k]
				g.Flux = append([]float64(nil), g.Flux...)
				for p, w := range g.Wave {
					for _, line := range series {
						g.Flux[p] *= math.Exp(-line.OpticalDepth(math.Pow(10, logN), 30, w/(1+z)))
					}
				}
			}
			bare += len(worker.Process(cloned(s)).Absorbers)
			out := worker.Process(painted)
			if v := spectrum.SpeedOfLight * math.Abs(out.Object.Redshift-truth[i].Redshift) / (1 + truth[i].Redshift); out.Object.Class != catalog.Galaxy || v > 1000 {
				continue // not about absorbers
			}
			tried++
			for _, a := range out.Absorbers {
				t.Logf("galaxy at %.3f, S/N %.1f: %s at %.4f for %.4f, log N %.2f +- %.2f for %.2f", truth[i].Redshift, truth[i].SNR, a.Kind, a.ZAbs, z,
					a.LogNHI, a.LogNHIErr, logN)
				if a.Kind == "hydrogen" && math.Abs(a.ZAbs-z)/(1+z)*spectrum.SpeedOfLight < 800 {
					found++
					if math.Abs(a.LogNHI-logN) > 4*a.LogNHIErr {
						t.Errorf("log N = %.2f +- %.2f, painted %.2f", a.LogNHI, a.LogNHIErr, logN)
					}
				}
			}
		}
	}
	t.Logf("%d of %d painted systems in the rows, %d rows without", found, tried, bare)
	if tried < 5 || float64(found) < 0.75*float64(tried) || bare > 1+tried/10 {
		t.Errorf("%d of %d painted systems in the rows, %d rows without", found, tried, bare)
	}
}

// Interstellar Lyman alpha reaches the table where a hot star leaves it visible, and
// where the line is the star's own no row says otherwise. Lambda Leporis, B0.5 IV:
// log N(HI) = 20.18 of Diplas & Savage (1994), from memory. The others are
// white dwarfs, A stars and a B3 star with wide Lyman alpha.
func TestInterstellarHydrogenInChain(t *testing.T) {
	dir := filepath.Join(outside.Spectra(t), "calspec")
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	rows := func(name string) []catalog.Absorber {
		f, err := fitsread.Open(filepath.Join(dir, name), fitsread.Options{})
		if err != nil {
			t.Fatal(err)
		}
		defer f.Close()
		s, err := f.Read(0)
		if err != nil {
			t.Fatal(err)
		}
		return worker.Process(s).Absorbers
	}
	got := rows("lamlep_stis_006.fits")
	if len(got) != 1 || got[0].Kind != "hydrogen" || math.Abs(got[0].LogNHI-20.18) > 0.15 {
		t.Errorf("Lambda Leporis: %+v", got)
	} else {
		t.Logf("Lambda Leporis: log N(HI) = %.2f +- %.2f, published 20.18", got[0].LogNHI, got[0].LogNHIErr)
	}
	for _, name := range []string{"alpha_lyr_stis_010.fits", "sirius_stis_004.fits", "etauma_stis_006.fits", "grw_70d5824_stiswfcnic_003.fits",
		"wd2341_322_stiswfc_004.fits", "sdss132811_stis_003.fits", "hd14943_stis_005.fits", "sun_reference_stis_002.fits"} {
		if got := rows(name); len(got) > 0 {
			t.Errorf("%s: %+v", name, got)
		}
	}
}
