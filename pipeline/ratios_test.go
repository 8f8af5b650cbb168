package pipeline

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"testing"

	"duskline/configs"
	"duskline/internal/outside"
	"duskline/linelist"
	"duskline/redshift"
)

// ratioCase is a component whose relative depths are measured.
type ratioCase struct {
	family, component string
	and               string   // family whose objects are measured too
	held              []string // components fitted beside it
	strong            bool     // on the half of the objects with the strongest lines
	library           []string // spectra beside those of the survey
	factor            float64  // that the recipe may differ by
	// Shapes that are not what is measured alone, and why, by name.
	blended map[string]string
}

const (
	// alike is what halves of the objects of one family differ by, 1.1 to 1.3,
	// where lines are of one ion.
	alike = 1.3
	// unlike is what they differ by for lines of many ions: stars of types F to
	// K, galaxies of ages and metal contents.
	unlike = 1.5
)

var (
	nebular = []string{"balmer", "balmer_reddened", "OII", "OIII", "NII", "SII", "NeIII"}
	bands   = []string{"chromosphere", "TiO_alpha", "TiO_gamma_prime", "TiO_gamma", "TiO_red"}
	metal   = map[string]string{"Hg": "the G band", "H7": "Ca II H", "H9": "Mg I and Fe I at 3836"}
)

var ratioCases = []ratioCase{
	{family: "late", component: "metals", held: []string{"sodium", "calcium_triplet", "balmer_absorption", "balmer_wings"}, strong: true, library: libraryDwarfs, factor: unlike},
	{family: "late", component: "sodium", held: []string{"metals", "calcium_triplet", "balmer_absorption", "balmer_wings"}, library: libraryDwarfs, factor: alike},
	{family: "late", component: "calcium_triplet", held: []string{"metals", "sodium", "balmer_absorption", "balmer_wings"}, library: libraryDwarfs, factor: alike},
	{family: "late", component: "balmer_absorption", and: "hot", held: []string{"metals", "sodium", "calcium_triplet"}, factor: alike},
	{family: "late", component: "balmer_wings", and: "hot", held: []string{"metals", "sodium", "calcium_triplet", "balmer_absorption"}, factor: alike},
	{family: "passive", component: "typical", held: []string{"OII", "Ha_NII"}, factor: unlike},
	{family: "passive", component: "metals", held: []string{"balmer_absorption", "break_4000", "OII", "Ha_NII"}, factor: unlike},
	{family: "passive", component: "balmer_absorption", held: []string{"metals", "break_4000", "broad_bands", "OII"}, factor: unlike, blended: metal},
	{family: "emission", component: "metals", held: append([]string{"balmer_absorption"}, nebular...), factor: unlike},
	{family: "emission", component: "balmer_absorption", held: append([]string{"metals"}, nebular...), factor: alike},
	{family: "cool", component: "alkali", held: append([]string{"metals", "calcium_triplet"}, bands...), library: libraryM0, factor: unlike},
	{family: "cool", component: "calcium_triplet", held: append([]string{"metals", "alkali"}, bands...), library: libraryM0, factor: alike},
	{family: "cool", component: "metals", held: append([]string{"alkali", "calcium_triplet"}, bands...), library: libraryM0, factor: unlike},
	{family: "cool", component: "calcium_hydride", held: append([]string{"metals", "alkali", "calcium_triplet"}, bands...), library: libraryM0, factor: unlike},
}

// ratioBench is what the measurements of ratios share.
type ratioBench struct {
	chain    *Chain
	list     *linelist.List
	families map[string]*redshift.Family
	survey   []restObject
}

func newRatioBench(t *testing.T) *ratioBench {
	t.Helper()
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	outside.Spectra(t)
	b := &ratioBench{families: map[string]*redshift.Family{}}
	var err error
	if b.chain, err = NewChain(DefaultSettings()); err != nil {
		t.Fatal(err)
	}
	if b.list, err = linelist.Parse(configs.Lines()); err != nil {
		t.Fatal(err)
	}
	for _, f := range b.chain.finder.Families() {
		b.families[f.Name] = f
	}
	b.survey = surveyObjects(t, b.chain)
	return b
}

// of returns the survey objects of a family.
func (b *ratioBench) of(family string) []restObject {
	var out []restObject
	for _, o := range b.survey {
		if o.family == family {
			out = append(out, o)
		}
	}
	return out
}

// component returns the number of a component of a family and its shapes.
func (b *ratioBench) component(t *testing.T, family, name string) (int, []redshift.ShapeView) {
	t.Helper()
	f := b.families[family]
	views := f.View(f.Widths[0])
	i := slices.IndexFunc(views, func(v redshift.ComponentView) bool { return v.Name == name })
	if i < 0 {
		t.Fatalf("family %s has no component %s", family, name)
	}
	return i, views[i].Shapes
}

// agrees reports whether a ratio is within a factor of the measured one or
// within three of its errors.
func agrees(ratio, measured, sigma, factor float64) bool {
	return measured > 0 && math.Abs(math.Log(ratio/measured)) <= math.Log(factor) || math.Abs(ratio-measured) <= 3*sigma
}

// TestRecipeRatios measures the relative depths of the lines of components on
// the secure survey objects of a family, all of them and never one, and holds
// the recipes to them. What no survey object covers is held to library spectra;
// elsewhere those stand in the log for comparison: at their resolution lines
// run together.
func TestRecipeRatios(t *testing.T) {
	b := newRatioBench(t)
	for _, c := range ratioCases {
		var held []int
		for _, name := range c.held {
			i, _ := b.component(t, c.family, name)
			held = append(held, i)
		}
		var shapes []shape
		var recipe []float64
		_, views := b.component(t, c.family, c.component)
		for _, v := range views {
			shapes, recipe = append(shapes, newShape(t, v, b.list)), append(recipe, v.Ratio)
		}
		measure := func(objects []restObject, strong bool) (ratio, err []float64) {
			var depth, sigma [][]float64
			for i := range objects {
				d, s := measureDepths(&objects[i], shapes, b.families[c.family], held)
				depth, sigma = append(depth, d), append(sigma, s)
			}
			return commonRatios(depth, sigma, recipe, strong)
		}
		objects := append(b.of(c.family), b.of(c.and)...)
		if len(objects) < 4 {
			t.Errorf("%s: %d secure survey objects, too few to measure", c.family, len(objects))
			continue
		}
		ours, oursErr := measure(objects, c.strong)
		lib, libErr := make([]float64, len(shapes)), make([]float64, len(shapes))
		if c.library != nil {
			lib, libErr = measure(libraryObjects(t, b.chain, c.library), false)
		}
		t.Logf("%s %s: recipe, %d survey objects, library", c.family, c.component, len(objects))
		for k := range shapes {
			name, m, e := shapes[k].name(), ours[k], oursErr[k]
			line := fmt.Sprintf("  %-12s %.2f  %.2f +- %.2f", name, recipe[k], m, e)
			if c.library != nil {
				line += fmt.Sprintf("  %.2f +- %.2f", lib[k], libErr[k])
			}
			t.Log(line)
			if math.IsNaN(m) && c.library != nil {
				m, e = lib[k], libErr[k]
			}
			if c.blended[name] == "" && !agrees(recipe[k], m, e, c.factor) {
				t.Errorf("%s %s: %s is %.2f in the recipe, %.2f +- %.2f as measured, a factor of %.1f is allowed", c.family, c.component, name, recipe[k], m, e, c.factor)
			}
		}
	}
}

// TestRecipeRatiosOfYoungStars holds component young of galaxies after a burst to A
// stars: depths measured, times the share that black-body light of 9,000 K has
// beside light of 4,600 K (Planck's law), 0.7 at 4500 Angstrom. The mean types of the
// library spectra are A0 to F0; between them the lines differ by the factor.
func TestRecipeRatiosOfYoungStars(t *testing.T) {
	b := newRatioBench(t)
	_, views := b.component(t, "postburst", "young")
	var shapes []shape
	var recipe []float64
	for _, v := range views {
		shapes, recipe = append(shapes, newShape(t, v, b.list)), append(recipe, v.Ratio)
	}
	var depth, sigma [][]float64
	for _, o := range libraryObjects(t, b.chain, libraryA) {
		d, s := measureDepths(&o, shapes, b.families["postburst"], nil)
		depth, sigma = append(depth, d), append(sigma, s)
	}
	measured, err := commonRatios(depth, sigma, recipe, false)
	planck := func(wave, kelvin float64) float64 {
		return math.Pow(wave/4500, -5) * math.Expm1(1.438777e8/(4500*kelvin)) / math.Expm1(1.438777e8/(wave*kelvin))
	}
	share := func(wave float64) float64 {
		return 0.7 * planck(wave, 9000) / (0.7*planck(wave, 9000) + 0.3*planck(wave, 4600))
	}
	scale := 0.0
	for k := range shapes {
		if shapes[k].Name == "Hd" {
			scale = recipe[k] / (measured[k] * share(shapes[k].Wave))
		}
	}
	for k := range shapes {
		if shapes[k].Name == "" || shapes[k].Name == "CaII_K" {
			continue // the edge and calcium are set by what old stars do to them
		}
		m, e := measured[k]*share(shapes[k].Wave)*scale, err[k]*share(shapes[k].Wave)*scale
		t.Logf("%-5s %.2f  %.2f +- %.2f", shapes[k].name(), recipe[k], m, e)
		if !agrees(recipe[k], m, e, alike) {
			t.Errorf("%s is %.2f in the recipe, %.2f +- %.2f as measured", shapes[k].name(), recipe[k], m, e)
		}
	}
}

// TestRecipeRatiosOfBandHeads measures by what fraction the light drops across each TiO
// head, from 2 to 14 Angstrom on either side, and holds the depths of the recipe,
// drawn and measured alike, to the median of the survey's M stars. That shows
// too that the heads are where the recipe has them. Heads that only the latest stars
// show are measured on VB 8 (M7, CALSPEC) from 5 to 25 Angstrom, its resolution.
// M0 and M4 dwarfs differ by the factor, after the common strength.
func TestRecipeRatiosOfBandHeads(t *testing.T) {
	b := newRatioBench(t)
	cool := b.families["cool"]
	for _, c := range []struct {
		component string
		objects   []restObject
		from, to  float64
	}{
		{"TiO_alpha", b.of("cool"), 2, 14},
		{"TiO_gamma_prime", b.of("cool"), 2, 14},
		{"TiO_gamma", b.of("cool"), 2, 14},
		{"TiO_red", libraryObjects(t, b.chain, libraryM7), 5, 25},
	} {
		number, heads := b.component(t, "cool", c.component)
		var drops, drawn []float64
		for _, h := range heads {
			var v []float64
			for i := range c.objects {
				if d := dropAcross(&c.objects[i], h.Wave, c.from, c.to); !math.IsNaN(d) {
					v = append(v, d)
				}
			}
			sort.Float64s(v)
			if len(v) == 0 {
				t.Errorf("no spectrum covers the head at %.1f", h.Wave)
				v = []float64{math.NaN()}
			}
			drops = append(drops, v[len(v)/2])
			drawn = append(drawn, dropDrawn(cool, number, h.Wave, c.from, c.to))
		}
		num, den := 0.0, 0.0
		for k := range heads {
			num, den = num+drops[k]*drawn[k], den+drawn[k]*drawn[k]
		}
		t.Logf("%s, %d objects: amplitude %.2f", c.component, len(c.objects), num/den)
		for k, h := range heads {
			want := drawn[k] * num / den
			t.Logf("  %.1f recipe %.2f drops by %.3f, measured %.3f", h.Wave, h.Ratio, want, drops[k])
			// 0.04: lines of metals in the windows.
			if !agrees(want, drops[k], 0.04/3, unlike) {
				t.Errorf("%s: the head at %.1f drops by %.3f in the recipe, by %.3f as measured", c.component, h.Wave, want, drops[k])
			}
		}
	}
}

// dropAcross is the fraction by which the light is fainter from +from to +to
// Angstrom than from -to to -from.
func dropAcross(o *restObject, wave, from, to float64) float64 {
	var sum, n [2]float64
	for i, w := range o.grid.Ivar {
		d := math.Pow(10, o.grid.LogWave(i)) - wave
		if w > 0 && math.Abs(d) >= from && math.Abs(d) <= to {
			side := 0
			if d > 0 {
				side = 1
			}
			sum[side], n[side] = sum[side]+o.grid.Flux[i], n[side]+1
		}
	}
	if n[0] < 3 || n[1] < 3 {
		return math.NaN()
	}
	return 1 - sum[1]/n[1]/(sum[0]/n[0])
}

// dropDrawn is the same of a component at an amplitude of 0.5, half of what it is
// at most, per unit of amplitude.
func dropDrawn(f *redshift.Family, component int, wave, from, to float64) float64 {
	mean := func(a, b float64) float64 {
		sum := 0.0
		v := f.Curve(component, 0, f.Widths[0], a, b, 40)
		for _, u := range v {
			sum += 1 + 0.5*u
		}
		return sum / float64(len(v))
	}
	return 2 * (1 - mean(wave+from, wave+to)/mean(wave-to, wave-from))
}
