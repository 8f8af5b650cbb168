package pipeline_test

import (
	"math"
	"path/filepath"
	"testing"

	"duskline/catalog"
	"duskline/internal/outside"
	"duskline/pipeline"
	"duskline/spectrum"
)

// Open spectra of hot stars are described by the computed Balmer lines. The bounds of chi2_dof,
// which a template error of 2 % rules, lie half-way (in the logarithm) between what is reached
// and what Gaussian lines with a step at 3,720 Angstrom left: 12.1, 10.5, 12.5, 3.4, 0.64, 0.47,
// 1.83 and 3.15 in this order. Velocities hold to 150 km/s: STIS resolves no more than 300 km/s,
// and gravity shifts white dwarfs by 20 to 70 km/s (from memory).
func TestHotStarsDescribed(t *testing.T) {
	dir := outside.Spectra(t)
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	for _, star := range []struct {
		file string
		z    float64 // published
		most float64 // chi2_dof
	}{
		{"calspec/alpha_lyr_stis_010.fits", 0, 7.5},
		{"calspec/sirius_stis_004.fits", 0, 6.4},
		{"calspec/ksi2ceti_stis_005.fits", 0, 8.5},
		{"calspec/etauma_stis_006.fits", 0, 2.6},
		{"calspec/grw_70d5824_stiswfcnic_003.fits", 0, 0.57},
		{"calspec/hz43_stis_005.fits", 0, 0.40},
		{"lamost_dr1/spec-55862-B6212_sp06-114.fits", 0.000097, 1.57},
		{"sdss_random100/spec-5301-55987-0190.fits", 0.000054, 2.76},
	} {
		o, err := best(worker, filepath.Join(dir, star.file))
		if err != nil {
			t.Errorf("%s: %v", star.file, err)
			continue
		}
		v := spectrum.SpeedOfLight * (o.Redshift - star.z)
		t.Logf("%s: %s, %.0f km/s, chi2_dof %.2f", star.file, o.Family, v, o.Chi2Dof)
		if o.Family != "hot" || o.Verdict != catalog.Secure || !(math.Abs(v) < 150) || !(o.Chi2Dof < star.most) {
			t.Errorf("%s: %s, %s, %.0f km/s, chi2_dof %.2f, want it below %.2f", star.file, o.Family, o.Verdict, v, o.Chi2Dof, star.most)
		}
		if o.Flags.Has(catalog.LinesMissing) {
			t.Errorf("%s: lines that the model wants are missing", star.file)
		}
	}
}
