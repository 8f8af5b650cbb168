package pipeline_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"duskline/catalog"
	"duskline/internal/outside"
	"duskline/pipeline"
	"duskline/spectrum"
)

// Families made of a composite beside the built-in ones.
const (
	oldMix = `
name = "oldmix"
class = "galaxy"
summary = "A composite of passive galaxies."
redshift = [0.0008, 1.25]
floor_kms = 20.0
widths = [250.0]
expected = ["CaII_K", "CaII_H"]

[[component]]
name = "composite"
kind = "absorption"
most = 1.6
source = "stack of the secure passive galaxies of the other half"
stack = "passive.fits"

[[component]]
name = "OII"
kind = "emission"
source = "as in family emission"
lines = [{ line = "OII_3726", ratio = 1.0 }, { line = "OII_3729", ratio = 1.2 }]

[[component]]
name = "Ha"
kind = "emission"
source = "as in family passive"
lines = [{ line = "Ha", ratio = 1.0 }, { line = "NII_6583", ratio = 1.0 }, { line = "NII_6548", ratio = 0.328 }]
`
	quasarMix = `
name = "quasarmix"
class = "quasar"
summary = "A composite of quasars."
redshift = [0.05, 7.0]
floor_kms = 350.0
widths = [2600.0]
expected = ["CIV_1548", "CIII_1908", "MgII_2796"]

[[component]]
name = "composite"
kind = "absorption"
most = 2.0
source = "stack of the secure quasars of the other half"
stack = "quasar.fits"

[[component]]
name = "forest"
kind = "absorption"
most = 1.3
source = "mean transmission of the intergalactic medium, Inoue et al. 2014"
forest = true
`
)

// splitTally counts right and right and secure ones by class, and secure but wrong
// ones.
type splitTally struct {
	right, secure map[string]int
	wrong         int
}

func (s splitTally) String() string {
	return fmt.Sprintf("galaxies %d / %d, quasars %d / %d, stars %d / %d, secure but wrong %d", s.right["GALAXY"], s.secure["GALAXY"],
		s.right["QSO"], s.secure["QSO"], s.right["STAR"], s.secure["STAR"], s.wrong)
}

// TestStackSplit tries composites of open survey spectra on spectra that are not
// in them: each half of the list, every second file, is run, its secure passive
// galaxies and quasars are stacked, and the other half is judged with the
// composites beside the built-in families. DUSKLINE_LONG=1 tries each composite by
// itself as well, and all on copies with noise added, at a quarter and an eighth
// of the signal-to-noise ratio.
func TestStackSplit(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	dir := outside.Spectra(t)
	list := readPublished(t, dir)
	var recipes [2]map[string]pipeline.RecipeText // by the half that is judged
	for half := range recipes {
		recipes[half] = stackRecipes(t, dir, list, 1-half)
	}
	kinds, noises := [][]string{nil, {"passive", "quasar"}}, []float64{1}
	if os.Getenv("DUSKLINE_LONG") == "1" {
		kinds, noises = [][]string{nil, {"passive"}, {"quasar"}, {"passive", "quasar"}}, []float64{1, 4, 8}
	}
	for _, noise := range noises {
		// Of some seventy one may turn by chance; with noise more lie at the edge:
		// two draws of it differ by up to three in a class.
		room := 1
		if noise > 1 {
			room = 3
		}
		var without splitTally
		for _, with := range kinds {
			got := judgeSplit(t, dir, list, recipes, with, noise)
			t.Logf("noise x %g, composites %v: %v", noise, with, got)
			if with == nil {
				without = got
				continue
			}
			for class, n := range without.right {
				if got.right[class] < n-room {
					t.Errorf("noise x %g: with composites %v %d of class %s are right, without %d", noise, with, got.right[class], class, n)
				}
			}
		}
	}
}

// stackRecipes runs one half of the list and returns the recipes of its composites.
func stackRecipes(t *testing.T, dir string, list []published, half int) map[string]pipeline.RecipeText {
	t.Helper()
	ctx := context.Background()
	base := t.TempDir()
	var paths []string
	for i, p := range list {
		if i%2 == half {
			paths = append(paths, filepath.Join(dir, p.file))
		}
	}
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	job := pipeline.Job{Out: "RUN", Base: base, Paths: paths, Settings: pipeline.DefaultSettings(), Program: "test", Processor: chain}
	run, err := pipeline.Prepare(ctx, job)
	if err != nil {
		t.Fatal(err)
	}
	if err := run.Work(ctx); err != nil {
		t.Fatal(err)
	}
	if _, err := run.Gather(ctx); err != nil {
		t.Fatal(err)
	}
	out := map[string]pipeline.RecipeText{}
	for kind, text := range map[string]string{"passive": oldMix, "quasar": quasarMix} {
		name := kind + ".fits"
		report, err := pipeline.Stack(ctx, pipeline.StackJob{Run: "RUN", Base: base, Out: name, Family: kind, Clip: 4, MinObjects: 3, MaxError: 0.1, Program: "test"})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("half %d: %d objects in the composite of family %s", half, report.Objects, kind)
		path := filepath.Join(base, kind+".toml")
		if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
		if out[kind], err = pipeline.ReadRecipe(path, path); err != nil {
			t.Fatal(err)
		}
	}
	return out
}

// judgeSplit judges both halves, each with the composites named of the other.
func judgeSplit(t *testing.T, dir string, list []published, recipes [2]map[string]pipeline.RecipeText, with []string, noise float64) splitTally {
	t.Helper()
	out := splitTally{map[string]int{}, map[string]int{}, 0}
	var chains [2]*pipeline.Chain
	for half := range chains {
		var add []pipeline.RecipeText
		for _, kind := range with {
			add = append(add, recipes[half][kind])
		}
		var err error
		if chains[half], err = pipeline.NewChain(pipeline.DefaultSettings(), add...); err != nil {
			t.Fatal(err)
		}
	}
	objects, errs := processAll(t, dir, list, func() func(int) pipeline.Worker {
		halves := [2]pipeline.Worker{chains[0].NewWorker(), chains[1].NewWorker()}
		return func(i int) pipeline.Worker {
			return noisy{halves[i%2], noise, rand.New(rand.NewPCG(1, uint64(i)))}
		}
	})
	for i, p := range list {
		o := objects[i]
		if errs[i] != nil || p.reliable != "yes" || math.IsNaN(p.z) || p.class == "SKY" {
			continue
		}
		right := p.right(&o)
		secure := o.Verdict == catalog.Secure
		switch {
		case right && secure:
			out.secure[p.class]++
			fallthrough
		case right:
			out.right[p.class]++
		case secure:
			out.wrong++
			t.Logf("secure but wrong: %s, %s at %.4f, published %.4f", p.file, o.Family, o.Redshift, p.z)
		}
	}
	return out
}

// noisy adds noise before a worker sees a spectrum, to factor times its errors.
type noisy struct {
	pipeline.Worker
	factor float64
	r      *rand.Rand
}

func (n noisy) Process(s *spectrum.Spectrum) pipeline.Outcome {
	for a := range s.Segments {
		g := &s.Segments[a]
		for i, w := range g.Ivar {
			if w > 0 {
				g.Flux[i] += math.Sqrt((n.factor*n.factor-1)/w) * n.r.NormFloat64()
				g.Ivar[i] /= n.factor * n.factor
			}
		}
	}
	return n.Worker.Process(s)
}
