package pipeline_test

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"

	"duskline/absorbers"
	"duskline/configs"
	"duskline/fitsread"
	"duskline/internal/outside"
	"duskline/linelist"
	"duskline/spectrum"
)

// stretchedFinder looks for doublets whose lines are factor times as far apart as
// nature's.
func stretchedFinder(t *testing.T, factor float64) *absorbers.Finder {
	t.Helper()
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		t.Fatal(err)
	}
	var text strings.Builder
	for _, pair := range [][2]string{{"MgII_2796", "MgII_2803"}, {"CIV_1548", "CIV_1550"}, {"SiIV_1393", "SiIV_1402"}, {"AlIII_1854", "AlIII_1862"}} {
		strong, ok1 := list.Find(pair[0])
		weak, ok2 := list.Find(pair[1])
		if !ok1 || !ok2 {
			t.Fatal(pair)
		}
		weak.Wave = strong.Wave + factor*(weak.Wave-strong.Wave)
		for _, l := range []linelist.Line{strong, weak} {
			fmt.Fprintf(&text, "[[line]]\nname = %q\nion = %q\nwave = %.4f\nf = %g\ngroup = \"pair\"\nseen = \"both\"\nsource = \"test\"\n", l.Name, l.Ion, l.Wave, l.F)
		}
	}
	stretched, err := linelist.Parse([]byte(text.String()))
	if err != nil {
		t.Fatal(err)
	}
	return absorbers.NewFinder(stretched)
}

// TestChancePairs measures in real quasars how many doublets are chance: pairs at
// 1.6 and 2.2 times the distance are as good at chance and are no doublets.
// Those at a line of an accepted doublet are left out, because real lines are no
// chance. Redshifts are the published ones.
func TestChancePairs(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	dir := outside.Spectra(t)
	real, decoys := stretchedFinder(t, 1), []*absorbers.Finder{stretchedFinder(t, 1.6), stretchedFinder(t, 2.2)}
	x := func(s *absorbers.System) float64 {
		w := map[string]float64{absorbers.MgII: 2796.35, absorbers.CIV: 1548.20, absorbers.SiIV: 1393.76, absorbers.AlIII: 1854.72}[s.Kind]
		return spectrum.SpeedOfLight * math.Log(w*(1+s.Z))
	}
	split := map[string]float64{absorbers.MgII: 769, absorbers.CIV: 498, absorbers.SiIV: 1932, absorbers.AlIII: 1302}
	for _, set := range []struct {
		name, prefix string
		most         float64 // decoys for a doublet
	}{{"surveys at R 2,000", "sdss", 0.25}, {"R 10,000", "xqr30", 0.2}} {
		var quasars, found, chance float64
		for _, p := range readPublished(t, dir) {
			if p.class != "QSO" && p.class != "quasar" || !strings.HasPrefix(p.file, set.prefix) || !(p.z > 0) {
				continue
			}
			f, err := fitsread.Open(filepath.Join(dir, p.file), fitsread.Options{})
			if err != nil {
				continue
			}
			f.Close()
			quasars++
			arms := sightlineArms(t, filepath.Join(dir, p.file))
			var lines []float64
			for _, s := range real.Find(nil, arms, absorbers.Options{Z: p.z}, nil) {
				if s.Kind != absorbers.Hydrogen {
					found++
					lines = append(lines, x(&s), x(&s)+split[s.Kind])
				}
			}
			for _, decoy := range decoys {
				for _, s := range decoy.Find(nil, arms, absorbers.Options{Z: p.z}, nil) {
					near := s.Kind == absorbers.Hydrogen
					for _, l := range lines {
						near = near || math.Abs(l-x(&s)) < 300
					}
					if !near {
						chance += 1 / float64(len(decoys))
					}
				}
			}
		}
		t.Logf("%s: %.0f doublets in front of %.0f quasars, %.1f chance pairs", set.name, found, quasars, chance)
		if found < 20 || chance > set.most*found {
			t.Errorf("%s: %.1f chance pairs beside %.0f doublets", set.name, chance, found)
		}
	}
}

// TestGalaxyAbsorbers: in front of the galaxies, at their published redshifts, hardly
// anything is found: nothing is known to be there, and lines of their own make neither pairs nor damped systems.
func TestGalaxyAbsorbers(t *testing.T) {
	dir := outside.Spectra(t)
	finder := stretchedFinder(t, 1)
	galaxies, found := 0, 0
	for _, p := range readPublished(t, dir) {
		if p.class != "GALAXY" || !(p.z >= 0) {
			continue
		}
		f, err := fitsread.Open(filepath.Join(dir, p.file), fitsread.Options{})
		if err != nil {
			continue
		}
		f.Close()
		galaxies++
		found += len(finder.Find(nil, sightlineArms(t, filepath.Join(dir, p.file)), absorbers.Options{Z: p.z, Before: absorbers.BeforeGalaxy}, nil))
	}
	t.Logf("%d absorbers in front of %d galaxies", found, galaxies)
	if galaxies < 50 || found > 2 {
		t.Errorf("%d absorbers in front of %d galaxies", found, galaxies)
	}
}
