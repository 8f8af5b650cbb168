package redshift

import (
	"io/fs"
	"math"
	"testing"

	"duskline/configs"
	"duskline/continuum"
	"duskline/linelist"
	"duskline/spectrum"
)

const testStep = 1e-4

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
