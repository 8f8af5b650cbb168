package pipeline_test

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"duskline/absorbers"
	"duskline/configs"
	"duskline/fitsread"
	"duskline/hydrogen"
	"duskline/internal/outside"
	"duskline/linelist"
)

// sightlineArms reads the first spectrum of a file as the chain does, up to the
// continuum, which the search for absorbers does not need.
func sightlineArms(t *testing.T, path string) []absorbers.Arm {
	t.Helper()
	f, err := fitsread.Open(path, fitsread.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s, err := f.Read(0)
	if err != nil {
		t.Fatal(err)
	}
	s.ToStandard()
	s.MaskSpikes(spikeSigmas)
	var arms []absorbers.Arm
	for k := range s.Segments {
		g := &s.Segments[k]
		arms = append(arms, absorbers.Arm{Wave: g.Wave, Flux: g.Flux, Ivar: g.Ivar, Resolution: g.Resolution})
	}
	return arms
}

// spikeSigmas is a wide limit for spikes, so that line cores stay.
const spikeSigmas = 8

func absorberFinder(t *testing.T) *absorbers.Finder {
	t.Helper()
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		t.Fatal(err)
	}
	return absorbers.NewFinder(list)
}

func readTableCSV(t *testing.T, path string) [][]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment, r.FieldsPerRecord, r.LazyQuotes = '#', -1, true
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows
}

func cell(row []string, i int) float64 {
	if i >= len(row) {
		return math.NaN()
	}
	v, err := strconv.ParseFloat(strings.TrimSpace(row[i]), 64)
	if err != nil {
		return math.NaN()
	}
	return v
}

// TestPublishedDamped holds column densities against Zafar et al. (2013) as
// quoted beside the spectra: two systems of J021741.8-370100 within 0.15 dex. The
// third, of UM669, was published from another spectrum; TestPublishedColumnTooDark
// shows why this one does not have it.
func TestPublishedDamped(t *testing.T) {
	dir := outside.Spectra(t)
	f := absorberFinder(t)
	for _, tc := range []struct {
		file       string
		z          float64
		zAbs, logN []float64
		tol        float64
	}{
		{"J021741.8-370100_norm.fits", 2.910, []float64{2.429, 2.514}, []float64{20.62, 20.46}, 0.15},
		{"UM669_nF.fits", 3.025, []float64{2.37}, []float64{21.00}, 0.25},
	} {
		systems := f.Find(nil, sightlineArms(t, filepath.Join(dir, "dla_highres", tc.file)), absorbers.Options{Z: tc.z}, nil)
		for i, z := range tc.zAbs {
			found := false
			for _, s := range systems {
				if s.Kind == absorbers.Hydrogen && math.Abs(s.Z-z) < 0.003 {
					found = true
					t.Logf("%s z %.5f: log N(HI) = %.3f +- %.3f, published %.2f", tc.file, s.Z, s.LogN, s.LogErr, tc.logN[i])
					if d := math.Abs(s.LogN - tc.logN[i]); !(d < tc.tol) {
						t.Errorf("%s: log N(HI) = %.3f +- %.3f, published %.2f", tc.file, s.LogN, s.LogErr, tc.logN[i])
					}
				}
			}
			if !found {
				t.Errorf("%s: no system at z = %.3f", tc.file, z)
			}
		}
	}
}

// TestPublishedColumnTooDark compares the flanks of the trough of UM669 in this
// spectrum, normalized by others, with the published column of 21.00, at the redshift
// at which it has Si II 1526, Al II 1670 and Fe II 1608, 2344 and 2600. On both sides
// more light comes through than that column leaves of a continuum of 1, even with no
// forest in front, while 100 Angstrom away the forest takes a fifth.
func TestPublishedColumnTooDark(t *testing.T) {
	const zMetals = 2.3697
	a := sightlineArms(t, filepath.Join(outside.Spectra(t), "dla_highres", "UM669_nF.fits"))[0]
	line, err := hydrogen.NewTransition(1, 2)
	if err != nil {
		t.Fatal(err)
	}
	alpha := line.Absorption()
	means := func(lo, hi, logN float64) (flux, left float64) {
		n := 0.0
		for i, w := range a.Wave {
			if w > lo && w < hi && a.Ivar[i] > 0 {
				flux += a.Flux[i]
				left += math.Exp(-alpha.OpticalDepth(math.Pow(10, logN), 30, w/(1+zMetals)))
				n++
			}
		}
		return flux / n, left / n
	}
	far, _ := means(4150, 4300, 21)
	t.Logf("mean flux from 4150 to 4300 Angstrom: %.2f", far)
	for _, b := range [][2]float64{{4075, 4080}, {4104, 4110}, {4110, 4118}} {
		flux, left := means(b[0], b[1], 21.00)
		_, ours := means(b[0], b[1], 20.82)
		t.Logf("%.0f-%.0f Angstrom: flux %.3f, log N = 21.00 leaves %.3f, 20.82 %.3f", b[0], b[1], flux, left, ours)
		if flux < 1.3*left {
			t.Errorf("%.0f-%.0f Angstrom: flux %.3f, log N = 21.00 leaves %.3f: the published column is possible", b[0], b[1], flux, left)
		}
	}
}

// TestPublishedMgII looks for the Mg II systems of a published survey in other
// exposures of the same quasars. Three of the five do not stand out in these: by
// hand sum, the stronger line of them has 4.1, 3.6 and -3 sigma, the weaker one
// 1.4, 0.5 and 7 (in the wing of an emission line).
func TestPublishedMgII(t *testing.T) {
	dir := outside.Spectra(t)
	f := absorberFinder(t)
	zs := map[string]float64{}
	for _, p := range readPublished(t, dir) {
		zs[p.file] = p.z
	}
	found := 0
	for _, row := range readTableCSV(t, filepath.Join(dir, "mgii_absorbers.csv"))[1:] {
		z, w, err := cell(row, 1), cell(row, 2), cell(row, 3)
		for _, s := range f.Find(nil, sightlineArms(t, filepath.Join(dir, row[0])), absorbers.Options{Z: zs[row[0]]}, nil) {
			// The table gives three decimals of z: 55 km/s either way.
			if s.Kind != absorbers.MgII || math.Abs(s.Z-z) > 0.0006+1e-4*(1+z) {
				continue
			}
			found++
			t.Logf("%s z %.4f: W = %.2f +- %.2f, published %.2f +- %.2f", row[0], s.Z, s.EW, s.EWErr, w, err)
			if math.Abs(s.EW-w) > 3*math.Hypot(s.EWErr, err) {
				t.Errorf("%s: W(2796) = %.2f +- %.2f, published %.2f +- %.2f", row[0], s.EW, s.EWErr, w, err)
			}
		}
	}
	if found < 2 {
		t.Errorf("%d of 5 systems found, want 2", found)
	}
}
