package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"duskline/configs"
	"duskline/hydrogen"
	"duskline/linelist"
)

// Every built-in recipe parses and keeps what the tool relies on.
func TestBuiltInRecipes(t *testing.T) {
	names, texts := builtInRecipes(t)
	list := builtInLines(t)
	seen := map[string]bool{}
	for _, name := range names {
		f, err := ParseRecipe(name, texts[name], list)
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		if f.Name+".toml" != name {
			t.Errorf("%s holds family %q", name, f.Name)
		}
		if seen[f.Name] {
			t.Errorf("family %q stands in two files", f.Name)
		}
		seen[f.Name] = true
		if f.Summary == "" {
			t.Errorf("%s has no summary", name)
		}
		for i := range f.components {
			c := &f.components[i]
			if c.name == "" {
				t.Errorf("%s: component %d has no name", name, i)
			}
			for _, other := range f.components[:i] {
				if other.name == c.name {
					t.Errorf("%s: two components are called %q", name, c.name)
				}
			}
		}
		again, err := ParseRecipe(name, slices.Clone(texts[name]), list)
		if err != nil || again.Digest != f.Digest || len(f.Digest) != 16 {
			t.Errorf("%s: digests %q and %q of the same text (%v), want 16 equal digits", name, f.Digest, again.Digest, err)
		}
		changed, err := ParseRecipe(name, append(slices.Clone(texts[name]), "# a comment\n"...), list)
		if err != nil || changed.Digest == f.Digest {
			t.Errorf("%s: digest %q of another text (%v)", name, changed.Digest, err)
		}
	}
}

const goodRecipe = `name = "lamp"
class = "galaxy"
summary = "for tests"
redshift = [0.0, 0.04]
floor_kms = 10.0
widths = [100.0, 200.0]
expected = ["Ha"]

[[component]]
name = "glow"
kind = "emission"
source = "invented"
width_scale = 2.0
lines = [{ line = "Ha", ratio = 1.0 }, { line = "OIII_5007", ratio = 0.5, shift = -100.0 }]
case_b = { temperature = 1.0e4, density = 100.0, upper = [4] }

[[component]]
name = "shade"
kind = "absorption"
source = "invented"
most = 0.5
width = 300.0
bumps = [{ wave = 5000.0, width = 400.0, height = 0.3 }]
edges = [{ wave = 4000.0, width = 40.0, height = 0.7 }]
heads = [{ wave = 5170.0, depth = 0.5, tail = 100.0 }]
forest = true
`

// A recipe becomes the family that it describes.
func TestParseRecipeCompiles(t *testing.T) {
	f, err := ParseRecipe("lamp.toml", []byte(goodRecipe), builtInLines(t))
	if err != nil {
		t.Fatal(err)
	}
	if f.Name != "lamp" || f.Class != "galaxy" || f.ZMin != 0 || f.ZMax != 0.04 || !slices.Equal(f.Widths, []float64{100, 200}) || f.floor != 10 {
		t.Errorf("family %+v", f)
	}
	if len(f.components) != 2 || len(f.expected) != 1 {
		t.Fatalf("%d components, %d expected lines", len(f.components), len(f.expected))
	}
	glow, shade := &f.components[0], &f.components[1]
	if glow.absorption || !shade.absorption || shade.most != 0.5 || !shade.forest || shade.dense == nil || glow.dense != nil {
		t.Errorf("components %+v and %+v", glow, shade)
	}
	if len(glow.terms) != 3 || len(shade.terms) != 1 {
		t.Fatalf("%d and %d Gaussians, want 3 and 1", len(glow.terms), len(shade.terms))
	}
	if got := glow.sigmaKms(&glow.terms[0], 100); got != 200 {
		t.Errorf("width_scale 2 of 100 km/s makes %g", got)
	}
	if got := shade.sigmaKms(&shade.terms[0], 100); got != 400 {
		t.Errorf("a bump of 400 km/s is %g wide", got)
	}
	// The shift is a Doppler factor, 1 + v/c.
	oiii, _ := builtInLines(t).Find("OIII_5007")
	want := oiii.Wave * (1 - 100/speedOfLight)
	if got := pow10(glow.terms[1].logWave); got/want-1 > 1e-13 || got/want-1 < -1e-13 {
		t.Errorf("[O III] 5007 shifted by -100 km/s is at %.6f, want %.6f", got, want)
	}
	// Case B: the ratio and wavelength of package hydrogen, named after the list.
	if hb := glow.terms[2]; hb.name != "Hb" || hb.amp != hydrogen.CaseB(1e4, 100, 4) {
		t.Errorf("case_b with upper = 4 made %+v", hb)
	}
}

func TestParseRecipeRefuses(t *testing.T) {
	list := builtInLines(t)
	const glow, shade = `component "glow"`, `component "shade"`
	tooMany := goodRecipe
	for range 14 {
		tooMany += "[[component]]\nname = \"more\"\nkind = \"emission\"\nsource = \"invented\"\nlines = [{ line = \"Ha\", ratio = 1.0 }]\n"
	}
	for _, c := range []struct {
		name, old, replacement string
		want                   []string // all in the error, beside the file
	}{
		{"not TOML", `name = "lamp"`, `name = `, nil},
		{"unknown key", "floor_kms", "flor_kms", []string{"unknown keys", "flor_kms"}},
		{"unknown key of a component", "width_scale", "width_scales", []string{"unknown keys", "width_scales"}},
		{"no name", `name = "lamp"`, ``, []string{"name is missing"}},
		{"unknown class", `"galaxy"`, `"planet"`, []string{`class = "planet"`, "nebula"}},
		{"no redshift", "redshift = [0.0, 0.04]", "", []string{"redshift = []"}},
		{"one redshift", "[0.0, 0.04]", "[0.0]", []string{"redshift = [0]"}},
		{"empty redshift range", "[0.0, 0.04]", "[0.02, 0.02]", []string{"redshift = [0.02 0.02]"}},
		{"redshift range upside down", "[0.0, 0.04]", "[0.02, 0.01]", []string{"redshift = [0.02 0.01]"}},
		{"redshift below -0.5", "[0.0, 0.04]", "[-0.6, 0.04]", []string{"redshift = [-0.6 0.04]"}},
		{"redshift above 12", "[0.0, 0.04]", "[0.0, 12.5]", []string{"redshift = [0 12.5]"}},
		{"heads over a wide range", "[0.0, 0.04]", "[0.0, 0.2]", []string{"redshift = [0 0.2]", "heads"}},
		{"redshift not a number", "[0.0, 0.04]", "[nan, 0.04]", []string{"redshift = [NaN 0.04]"}},
		{"last redshift not a number", "[0.0, 0.04]", "[0.0, nan]", []string{"redshift = [0 NaN]"}},
		{"first redshift without end", "[0.0, 0.04]", "[-inf, 0.04]", []string{"redshift = [-Inf 0.04]"}},
		{"no widths", "widths = [100.0, 200.0]", "", []string{"widths is empty"}},
		{"width too small", "[100.0, 200.0]", "[100.0, 5.0]", []string{"widths: 5 is outside"}},
		{"width not a number", "[100.0, 200.0]", "[nan]", []string{"widths: NaN is outside"}},
		{"negative floor", "floor_kms = 10.0", "floor_kms = -1.0", []string{"floor_kms = -1"}},
		{"unknown expected line", `["Ha"]`, `["Hz"]`, []string{"expected", `"Hz"`}},
		{"no components", goodRecipe[strings.Index(goodRecipe, "[[component]]"):], "", []string{"0 components", "1 to 15"}},
		{"too many components", goodRecipe, tooMany, []string{"16 components", "1 to 15"}},
		{"unknown kind", `"emission"`, `"reflection"`, []string{glow, `kind = "reflection"`}},
		{"no source", "source = \"invented\"\nwidth_scale", "width_scale", []string{glow, "source is missing"}},
		{"unknown line", `line = "Ha"`, `line = "Hz"`, []string{glow, "lines", `"Hz"`}},
		{"negative ratio", "ratio = 0.5", "ratio = -0.5", []string{glow, "lines", "OIII_5007", "ratio = -0.5"}},
		{"no ratio", ", ratio = 1.0", "", []string{glow, "lines", "Ha", "ratio = 0"}},
		{"ratio not a number", "ratio = 0.5", "ratio = nan", []string{glow, "OIII_5007", "ratio = NaN"}},
		{"ratio without end", "ratio = 0.5", "ratio = inf", []string{glow, "OIII_5007", "ratio = +Inf"}},
		{"shift not a number", "shift = -100.0", "shift = nan", []string{glow, "OIII_5007", "shift = NaN"}},
		{"shift faster than light", "shift = -100.0", "shift = -3.0e5", []string{glow, "OIII_5007", "shift = -300000"}},
		{"negative width_scale", "width_scale = 2.0", "width_scale = -2.0", []string{glow, "width_scale"}},
		{"width_scale not a number", "width_scale = 2.0", "width_scale = nan", []string{glow, "width_scale"}},
		{"negative width", "width = 300.0", "width = -300.0", []string{shade, "width"}},
		{"width beyond all", "width = 300.0", "width = 1.0e6", []string{shade, "width = 1e+06"}},
		{"bump beyond all", "width = 400.0", "width = 1.0e6", []string{shade, "bumps"}},
		{"head without end", "tail = 100.0", "tail = inf", []string{shade, "heads"}},
		{"shift beyond any outflow", "shift = -100.0", "shift = -30001.0", []string{glow, "OIII_5007", "shift = -30001"}},
		{"needs what is not there", `expected = ["Ha"]`, `needs = ["glow", "glare"]`, []string{"needs", `"glare"`}},
		{"negative least", "most = 0.5", "least = -0.1", []string{shade, "least = -0.1"}},
		{"least not a number", "most = 0.5", "least = nan", []string{shade, "least = NaN"}},
		{"least above most", "most = 0.5", "most = 0.5\nleast = 0.6", []string{shade, "least = 0.6", "most"}},
		{"negative proximity", "forest = true", "forest = true\nproximity_kms = -1.0", []string{shade, "proximity_kms = -1"}},
		{"proximity not a number", "forest = true", "forest = true\nproximity_kms = nan", []string{shade, "proximity_kms = NaN"}},
		{"proximity beyond all", "forest = true", "forest = true\nproximity_kms = 10001.0", []string{shade, "proximity_kms = 10001"}},
		{"proximity without a forest", "width = 300.0", "width = 300.0\n[[component]]\nname = \"zone\"\nkind = \"emission\"\nsource = \"invented\"\nproximity_kms = 500.0\nlines = [{ line = \"Ha\", ratio = 1.0 }]\n[[component]]\nname = \"shade\"\nkind = \"absorption\"\nsource = \"invented\"", []string{`component "zone"`, "proximity_kms = 500", "forest"}},
		{"negative most", "most = 0.5", "most = -0.5", []string{shade, "most = -0.5"}},
		{"most not a number", "most = 0.5", "most = nan", []string{shade, "most = NaN"}},
		{"upper level below the lower", "upper = [4]", "upper = [2]", []string{glow, "case_b"}},
		{"upper level without a ratio", "upper = [4]", "upper = [400]", []string{glow, "case_b"}},
		{"case_b without upper levels", "upper = [4]", "upper = []", []string{glow, "case_b"}},
		{"case_b without a temperature", "temperature = 1.0e4, ", "", []string{glow, "case_b"}},
		{"empty bump", "height = 0.3", "height = 0.0", []string{shade, "bumps"}},
		{"empty edge", "height = 0.7", "height = -0.7", []string{shade, "edges"}},
		{"head without a tail", "tail = 100.0", "tail = 0.0", []string{shade, "heads"}},
		{"edges that emit", `kind = "absorption"`, `kind = "emission"`, []string{shade, "edges, heads and stark are depths", "a forest absorbs"}},
	} {
		text := strings.Replace(goodRecipe, c.old, c.replacement, 1)
		if text == goodRecipe {
			t.Errorf("%s: nothing was replaced", c.name)
		}
		f, err := ParseRecipe("lamp.toml", []byte(text), list)
		if err == nil {
			t.Errorf("%s: accepted as %+v", c.name, f)
			continue
		}
		for _, want := range append(c.want, "lamp.toml") {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%s: the error does not say %q:\n%v", c.name, want, err)
			}
		}
	}
	// Every problem at once, each on a line that names the file.
	text := strings.NewReplacer(`"galaxy"`, `"planet"`, `line = "Ha"`, `line = "Hz"`, "most = 0.5", "most = -0.5").Replace(goodRecipe)
	_, err := ParseRecipe("lamp.toml", []byte(text), list)
	if err == nil {
		t.Fatal("accepted three faults")
	}
	lines := strings.Split(err.Error(), "\n")
	if len(lines) != 3 {
		t.Errorf("%d problems of 3:\n%v", len(lines), err)
	}
	for _, l := range lines {
		if !strings.HasPrefix(l, "lamp.toml: ") {
			t.Errorf("a problem without its file: %s", l)
		}
	}
}

// The keys at their ends are accepted and become what they say.
func TestParseRecipeNeeds(t *testing.T) {
	text := strings.NewReplacer("shift = -100.0", "shift = -30000.0", "most = 0.5", "most = 0.5\nleast = 0.5", "forest = true", "forest = true\nproximity_kms = 10000.0",
		`expected = ["Ha"]`, `needs = ["shade"]`).Replace(goodRecipe)
	f, err := ParseRecipe("lamp.toml", []byte(text), builtInLines(t))
	if err != nil {
		t.Fatal(err)
	}
	if len(f.needs) != 1 || f.needs[0] != 1 || f.components[1].least != 0.5 || f.components[0].least != 0 {
		t.Errorf("needs %v, least %g and %g", f.needs, f.components[0].least, f.components[1].least)
	}
	if want := math.Log10(1 + 10000/speedOfLight); math.Abs(f.proximity-want) > 1e-15 {
		t.Errorf("a zone of 10,000 km/s is %g dex, want %g", f.proximity, want)
	}
	oiii, _ := builtInLines(t).Find("OIII_5007")
	if got, want := pow10(f.components[0].terms[1].logWave), oiii.Wave*(1-30000/speedOfLight); math.Abs(got/want-1) > 1e-13 {
		t.Errorf("[O III] 5007 shifted by -30,000 km/s is at %.6f, want %.6f", got, want)
	}
}

// A family without what it needs, or with too little of it, is no better than the
// continuum; one of several is enough.
func TestScoreWithoutWhatIsNeeded(t *testing.T) {
	s := (&Finder{}).NewScratch()
	s.full.step = testStep
	fam := &Family{ZMin: 0, ZMax: 1, components: []component{{name: "always"}, {name: "some", least: 0.45}, {name: "other"}}}
	for _, c := range []struct {
		name  string
		needs []int
		amp   [3]float64
		whole bool
	}{
		{"nothing is needed", nil, [3]float64{1, 0, 0}, true},
		{"not there", []int{1, 2}, [3]float64{1, 0, 0}, false},
		{"too little of it", []int{1, 2}, [3]float64{1, 0.449, 0}, false},
		{"just enough of it", []int{1, 2}, [3]float64{1, 0.45, 0}, true},
		{"a little where a little is enough", []int{1, 2}, [3]float64{1, 0, 1e-6}, true},
		{"one of two, too little of the other", []int{1, 2}, [3]float64{1, 0.1, 0.1}, true},
		{"another than needed", []int{1}, [3]float64{1, 0, 1}, false},
	} {
		fam.needs = c.needs
		p := peak{family: fam}
		p.fit.gain = 1000
		copy(p.fit.amp[:], c.amp[:])
		want := 0.0
		if c.whole {
			want = math.Log(math.Log10(2)/testStep) - 1000
		}
		if s.score(&p); math.Abs(p.score-want) > 1e-9 {
			t.Errorf("%s: score %g, want %g", c.name, p.score, want)
		}
	}
}

// A spectrum that has all of a family but what it needs is not found by it.
func TestFindWithoutWhatIsNeeded(t *testing.T) {
	const recipe = `name = "lamp"
class = "galaxy"
redshift = [0.0, 0.5]
widths = [200.0]
NEEDS
[[component]]
name = "hydrogen"
kind = "emission"
source = "invented"
lines = [{ line = "Ha", ratio = 2.86 }, { line = "Hb", ratio = 1.0 }]
[[component]]
name = "oxygen"
kind = "emission"
source = "invented"
lines = [{ line = "OI_6300", ratio = 1.0 }]
`
	g := emissionLines(t, rand.New(rand.NewPCG(4, 4)), 0.2, 200, 20)
	for needs, want := range map[string]bool{"": true, `needs = ["hydrogen"]`: true, `needs = ["oxygen"]`: false} {
		fam, err := ParseRecipe("lamp.toml", []byte(strings.Replace(recipe, "NEEDS", needs, 1)), builtInLines(t))
		if err != nil {
			t.Fatal(err)
		}
		f := newTestFinder(t, []*Family{fam})
		res := f.Find(g, f.NewScratch())
		DefaultThresholds().Judge(&res)
		if found := res.Found && math.Abs(res.Redshift-0.2) < 0.001; found != want || !want && res.Verdict == Secure {
			t.Errorf("%s: %v at %.4f, %v; want it found: %v", needs, res.Found, res.Redshift, res.Verdict, want)
		}
	}
}

func TestParseRecipeEmptyComponent(t *testing.T) {
	head, _, _ := strings.Cut(goodRecipe, "[[component]]")
	text := head + "[[component]]\nname = \"void\"\nkind = \"emission\"\nsource = \"invented\"\n"
	_, err := ParseRecipe("lamp.toml", []byte(text), builtInLines(t))
	if err == nil || !strings.Contains(err.Error(), `component "void": has no lines`) {
		t.Errorf("a component of nothing: %v", err)
	}
}

func TestNewFinderWantsFamilies(t *testing.T) {
	if _, err := NewFinder(nil, testStep, DefaultOptions()); err == nil {
		t.Error("a finder without families")
	}
	fams := builtInFamilies(t)
	if f := newTestFinder(t, fams); !slices.Equal(f.Families(), fams) {
		t.Error("the finder holds other families")
	}
}

// FuzzParseRecipe: any text is refused or makes a family that can be drawn and
// scanned.
func FuzzParseRecipe(f *testing.F) {
	f.Add([]byte(goodRecipe))
	f.Add([]byte(starkFamily))
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		f.Fatal(err)
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		fam, err := ParseRecipe("lamp.toml", text, list)
		if err != nil {
			return
		}
		l := bareLevel(300)
		var b bench
		var s scanner
		s.resp.reset(l)
		got := b.evaluate(l, fam, fam.Widths[0], 0.01)
		if !(got.drop >= 0) {
			t.Errorf("a level of zeros is fitted with a drop of %g", got.drop)
		}
		if fam.ZMax < 2 {
			s.nominate(nil, l, fam, fam.Widths[0], everything(), 5, 6)
		}
	})
}
