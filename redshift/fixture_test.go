package redshift

import (
	"io/fs"
	"math"
	"slices"
	"sync"
	"testing"

	"duskline/configs"
	"duskline/continuum"
	"duskline/linelist"
	"duskline/spectrum"

	"github.com/pelletier/go-toml/v2"
)

const testStep = 1e-4

// defaults are the sections of configs/default.toml that steer this package.
type defaults struct {
	Continuum struct {
		KnotSpacing float64 `toml:"knot_spacing"`
	}
	Redshift struct {
		SearchFrom    float64   `toml:"search_from"`
		SearchTo      float64   `toml:"search_to"`
		TemplateFloor float64   `toml:"template_floor"`
		Stiffness     float64   `toml:"stiffness"`
		Temper        int       `toml:"temper"`
		Nominees      int       `toml:"nominees"`
		MinPixels     int       `toml:"min_pixels"`
		SkyBands      []float64 `toml:"sky_bands"`
		TelluricBands []float64 `toml:"telluric_bands"`
		TelluricFloor float64   `toml:"telluric_floor"`
		WaterBands    []float64 `toml:"water_bands"`
	}
	Lines struct {
		SkyBands []float64 `toml:"sky_bands"`
	}
	Verdict struct {
		SecureConfidence float64 `toml:"secure_confidence"`
		SecureLines      int     `toml:"secure_lines"`
		NoneConfidence   float64 `toml:"none_confidence"`
		GapScale         float64 `toml:"gap_scale"`
		TiedGap          float64 `toml:"tied_gap"`
		TiedShare        float64 `toml:"tied_share"`
		MisfitChi2       float64 `toml:"misfit_chi2"`
		HopelessChi2     float64 `toml:"hopeless_chi2"`
		FaintSNR         float64 `toml:"faint_snr"`
	}
}

var readDefaults = sync.OnceValue(func() (d defaults) {
	if err := toml.Unmarshal(configs.Default(), &d); err != nil {
		panic(err)
	}
	return d
})

// DefaultOptions returns the options of the default settings with the built-in line list.
func DefaultOptions() Options {
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		panic(err)
	}
	var emission []float64
	var galactic []string
	for _, l := range slices.Concat(list.Lines(), list.Rare()) {
		if l.Seen != "absorption" {
			emission = append(emission, l.Wave)
		}
		if l.Galactic {
			galactic = append(galactic, l.Name)
		}
	}
	d := readDefaults()
	pairs := func(v []float64) (out [][2]float64) {
		for i := 0; i+1 < len(v); i += 2 {
			out = append(out, [2]float64{v[i], v[i+1]})
		}
		return out
	}
	r := &d.Redshift
	return Options{
		KnotSpacing: d.Continuum.KnotSpacing, Floor: r.TemplateFloor, Stiffness: r.Stiffness, Temper: r.Temper, Nominees: r.Nominees,
		MinPixels: r.MinPixels, SearchFrom: r.SearchFrom, SearchTo: r.SearchTo, SkyBands: pairs(r.SkyBands),
		TelluricBands: pairs(r.TelluricBands), TelluricFloor: r.TelluricFloor, WaterBands: pairs(r.WaterBands), SkyLines: pairs(d.Lines.SkyBands),
		Lines: emission, Galactic: galactic, Night: list.Night(),
	}
}

// DefaultThresholds returns the thresholds of the default settings.
func DefaultThresholds() Thresholds {
	v := readDefaults().Verdict
	return Thresholds{SecureConfidence: v.SecureConfidence, SecureLines: v.SecureLines, NoneConfidence: v.NoneConfidence,
		GapScale: v.GapScale, TiedGap: v.TiedGap, TiedShare: v.TiedShare, MisfitChi2: v.MisfitChi2, HopelessChi2: v.HopelessChi2, FaintSNR: v.FaintSNR}
}

// kmsPixel is a pixel of the test grids in km/s.
const kmsPixel = speedOfLight * ln10 * testStep

func builtInLines(t testing.TB) *linelist.List {
	t.Helper()
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		t.Fatal(err)
	}
	return list
}

// builtInRecipes returns the recipes of configs/families by file name, in
// name order.
func builtInRecipes(t testing.TB) (names []string, texts map[string][]byte) {
	t.Helper()
	folder := configs.Families()
	names, err := fs.Glob(folder, "*.toml")
	if err != nil {
		t.Fatal(err)
	}
	texts = map[string][]byte{}
	for _, name := range names {
		text, err := fs.ReadFile(folder, name)
		if err != nil {
			t.Fatal(err)
		}
		texts[name] = text
	}
	if len(names) == 0 {
		t.Fatal("no built-in families")
	}
	return names, texts
}

func builtInFamilies(t testing.TB) []*Family {
	t.Helper()
	list := builtInLines(t)
	names, texts := builtInRecipes(t)
	var families []*Family
	for _, name := range names {
		f, err := ParseRecipe(name, texts[name], list)
		if err != nil {
			t.Fatal(err)
		}
		families = append(families, f)
	}
	return families
}

func newTestFinder(t testing.TB, families []*Family) *Finder {
	t.Helper()
	f, err := NewFinder(families, testStep, DefaultOptions())
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// blank returns a grid of n pixels from 3600 Angstrom with unit weights.
func blank(n int) *spectrum.Grid {
	g := &spectrum.Grid{Start: math.Log10(3600), Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n)}
	for i := range g.Ivar {
		g.Ivar[i] = 1
	}
	return g
}

// bareLevel returns a level whose spline is zero everywhere, so that nothing
// is projected out of a template.
func bareLevel(n int) *level {
	l := &level{n: n, start: 3.6, step: testStep, size: 4,
		weight: make([]float64, n), resid: make([]float64, n), cont: make([]float64, n),
		first: make([]int32, n), value: make([][4]float64, n)}
	l.normal.Reset(l.size)
	basis := continuum.Basis{Low: 0, High: 1, Intervals: 1}
	for i := range 20 {
		j, v := basis.Eval(float64(i) / 20)
		l.normal.Add(j, &v, 1)
	}
	if !l.normal.Factor() {
		panic("equations of twenty points are singular")
	}
	for i := range n {
		l.weight[i], l.cont[i] = 1, 1
	}
	return l
}

func pow10(x float64) float64 { return math.Pow(10, x) }

// logWaveAt is log10 of the wavelength at a pixel of a level.
func logWaveAt(l *level, pixel float64) float64 { return l.start + pixel*l.step }

// square returns the m x m upper left part of a matrix with stride
// maxComponents.
func square(g *[maxComponents * maxComponents]float64, m int) [][]float64 {
	out := make([][]float64, m)
	for i := range out {
		out[i] = g[i*maxComponents : i*maxComponents+m]
	}
	return out
}
