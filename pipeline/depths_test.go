package pipeline

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"sort"
	"testing"

	"duskline/catalog"
	"duskline/continuum"
	"duskline/fitsread"
	"duskline/internal/outside"
	"duskline/linelist"
	"duskline/redshift"
	"duskline/spectrum"

	"gonum.org/v1/gonum/mat"
)

// restObject is a spectrum with a secure redshift, at rest and divided by its
// continuum.
type restObject struct {
	family string
	grid   spectrum.Grid
}

// The folders that hold survey spectra of stars and galaxies, and library
// spectra: Pickles (1998), CALSPEC (Bohlin, Gordon & Tremblay 2014).
var (
	surveySpectra = []string{"sdss_random100/*", "sdss_misc/*", "lamost_dr1/*"}
	libraryDwarfs = []string{"pickles/pickles_G2V*", "pickles/pickles_K0V*", "calspec/18sco*", "calspec/p330e*", "calspec/sun*"}
	libraryA      = []string{"pickles/pickles_A0V*", "pickles/pickles_uk_9*", "pickles/pickles_uk_14*", "calspec/alpha_lyr*", "calspec/sirius*", "calspec/hd14943*"}
	libraryM0     = []string{"pickles/pickles_M0V*"}
	libraryM7     = []string{"calspec/vb8*"}
)

// surveyObjects runs the survey spectra and returns those with a secure redshift.
func surveyObjects(t *testing.T, chain *Chain) []restObject {
	t.Helper()
	return atRest(t, chain, surveySpectra, func(o *catalog.Object) (z float64, ok bool) {
		return o.Redshift, o.Verdict == catalog.Secure
	})
}

// libraryObjects returns library spectra, which are at rest.
func libraryObjects(t *testing.T, chain *Chain, patterns []string) []restObject {
	t.Helper()
	return atRest(t, chain, patterns, func(*catalog.Object) (z float64, ok bool) { return 0, true })
}

func atRest(t *testing.T, chain *Chain, patterns []string, redshiftOf func(*catalog.Object) (float64, bool)) []restObject {
	t.Helper()
	var out []restObject
	bench := chain.NewBench()
	for _, p := range patterns {
		files, err := filepath.Glob(filepath.Join(outside.Spectra(t), p))
		if err != nil || len(files) == 0 {
			outside.Missing(t, "there are no spectra %s", p)
		}
		for _, path := range files {
			f, err := fitsread.Open(path, fitsread.Options{})
			if err != nil {
				t.Fatal(err)
			}
			for row := range f.Count() {
				s, err := f.Read(row)
				if err != nil {
					continue // a file may hold more than its spectrum
				}
				o := bench.Process(s).Object
				z, ok := redshiftOf(&o)
				r := restObject{family: o.Family}
				if !ok || !chain.finder.Normalize(&r.grid, &bench.grid, bench.scratch) {
					continue
				}
				r.grid.Start -= math.Log10(1 + z)
				out = append(out, r)
			}
			f.Close()
		}
	}
	return out
}

// shape draws one shape of a component alone.
type shape struct {
	redshift.ShapeView
	family *redshift.Family
}

func newShape(t *testing.T, v redshift.ShapeView, list *linelist.List) shape {
	t.Helper()
	text := fmt.Sprintf("bumps = [{ wave = %.4f, width = %.4f, height = 1.0 }]", v.Wave, v.Width)
	if v.Kind == "edge" {
		text = fmt.Sprintf("edges = [{ wave = %.4f, width = %.4f, height = 1.0 }]", v.Wave, v.Width)
	}
	f, err := redshift.ParseRecipe("shape", []byte("name = \"shape\"\nclass = \"star\"\nsummary = \"One shape.\"\nredshift = [-0.01, 0.01]\nwidths = [100.0]\n"+
		"[[component]]\nname = \"shape\"\nkind = \"absorption\"\nsource = \"none\"\n"+text), list)
	if err != nil {
		t.Fatal(err)
	}
	return shape{v, f}
}

func (s *shape) name() string {
	if s.Name != "" {
		return s.Name
	}
	return fmt.Sprintf("%s %.1f", s.Kind, s.Wave)
}

// measureDepths fits the depths of the shapes to one object, together with held
// components of the family, a spline of the knot spacing of the search, and no
// negative depth (least squares; Lawson & Hanson 1974 for the bounds). NaN for
// shapes of which less than 0.8 is on the spectrum.
func measureDepths(o *restObject, shapes []shape, fam *redshift.Family, held []int) (depth, sigma []float64) {
	g := &o.grid
	first, last, n := math.Pow(10, g.Start), math.Pow(10, g.LogWave(g.Len()-1)), g.Len()
	weight := make([]float64, n)
	lo, hi := n, 0
	for i, w := range g.Ivar {
		if w > 0 {
			weight[i] = 1 / math.Sqrt(1/w+0.02*0.02) // 2 %, for what no shape describes
			lo, hi = min(lo, i), i
		}
	}
	var columns [][]float64
	index := make([]int, len(shapes))
	for k := range shapes {
		index[k] = -1
		v := shapes[k].family.Curve(0, 0, 100, first, last, n)
		seen, all := 0.0, 0.0
		for i := range v {
			if weight[i] > 0 {
				seen += v[i] * v[i]
			}
		}
		a, b := 0.9*shapes[k].Wave, 1.1*shapes[k].Wave
		if shapes[k].Kind == "edge" {
			a = shapes[k].Wave - 8*shapes[k].Width
		}
		for _, u := range shapes[k].family.Curve(0, 0, 100, a, b, int(math.Log10(b/a)/g.Step)+1) {
			all += u * u
		}
		if seen > 0.8*all {
			index[k] = len(columns)
			columns = append(columns, v)
		}
	}
	free := len(columns)
	for _, c := range held {
		v := fam.Curve(c, 0, fam.Widths[0], first, last, n)
		if slices.ContainsFunc(v[lo:hi+1], func(u float64) bool { return math.Abs(u) > 1e-3 }) {
			columns = append(columns, v)
		}
	}
	basis := continuum.NewBasis(g.LogWave(lo), g.LogWave(hi), DefaultSettings().Continuum.KnotSpacing)
	size := basis.Size()
	a := mat.NewDense(size+len(columns)+1, size+len(columns)+1, nil) // normal equations, the data last
	row := make([]float64, size+len(columns)+1)
	used := 0
	for i := lo; i <= hi; i++ {
		if weight[i] == 0 {
			continue
		}
		used++
		clear(row)
		j, b := basis.Eval(g.LogWave(i))
		copy(row[j:], b[:])
		for k, c := range columns {
			row[size+k] = c[i]
		}
		row[len(row)-1] = g.Flux[i]
		w2 := weight[i] * weight[i]
		for p, u := range row {
			if u != 0 {
				for q, v := range row {
					a.Set(p, q, a.At(p, q)+w2*u*v)
				}
			}
		}
	}
	// Out with the spline: the Schur complement of its block.
	top := mat.NewSymDense(size, nil)
	for p := range size {
		for q := p; q < size; q++ {
			top.SetSym(p, q, a.At(p, q))
		}
		top.SetSym(p, p, top.At(p, p)+1e-6) // in gaps
	}
	depth, sigma = make([]float64, len(shapes)), make([]float64, len(shapes))
	for k := range depth {
		depth[k] = math.NaN()
	}
	m := len(columns)
	var chol mat.Cholesky
	var x, g2 mat.Dense
	if !chol.Factorize(top) || chol.SolveTo(&x, a.Slice(0, size, size, size+m+1)) != nil {
		return depth, sigma
	}
	g2.Mul(a.Slice(size, size+m+1, 0, size), &x)
	g2.Sub(a.Slice(size, size+m+1, size, size+m+1), &g2)
	d := make([]float64, m)
	for range 20000 { // coordinate descent with bounds
		change := 0.0
		for k := range d {
			r := g2.At(k, m)
			for q := range d {
				r -= g2.At(k, q) * d[q]
			}
			next := math.Max(0, d[k]+r/(g2.At(k, k)+1e-9))
			change = math.Max(change, math.Abs(next-d[k]))
			d[k] = next
		}
		if change < 1e-7 {
			break
		}
	}
	chi2 := g2.At(m, m)
	for k := range d {
		chi2 -= d[k] * g2.At(k, m)
	}
	gg := mat.NewSymDense(m, nil)
	for p := range m {
		for q := p; q < m; q++ {
			gg.SetSym(p, q, g2.At(p, q))
		}
		gg.SetSym(p, p, gg.At(p, p)*(1+1e-9)+1e-9)
	}
	var inv mat.SymDense
	if !chol.Factorize(gg) || chol.InverseTo(&inv) != nil {
		return depth, sigma
	}
	for k, c := range index {
		if c >= 0 && c < free {
			depth[k] = d[c]
			sigma[k] = math.Sqrt(inv.At(c, c) * math.Max(1, chi2/float64(used)))
		}
	}
	return depth, sigma
}

// commonRatios returns the ratios r of depths that the objects share, depth of
// shape k in object i being a_i r_k, by weighted least squares in turn; strong
// takes the objects of more than the median amplitude alone. They are on the
// scale of the recipe's.
func commonRatios(depth, sigma [][]float64, recipe []float64, strong bool) (ratio, err []float64) {
	n := len(recipe)
	use := make([]bool, len(depth))
	for i := range use {
		use[i] = true
	}
	amplitude := make([]float64, len(depth))
	weight := func(i, k int) float64 {
		s := math.Hypot(sigma[i][k], 0.03) // objects differ by some hundredths
		if math.IsNaN(depth[i][k]) || s > 0.15 {
			return 0
		}
		return 1 / (s * s)
	}
	ratio, err = slices.Clone(recipe), make([]float64, n)
	for round := range 200 {
		for i := range depth {
			num, den := 0.0, 0.0
			for k := range n {
				if w := weight(i, k); w > 0 {
					num += w * depth[i][k] * ratio[k]
					den += w * ratio[k] * ratio[k]
				}
			}
			amplitude[i] = 0
			if den > 0 {
				amplitude[i] = num / den
			}
		}
		if strong && round == 100 {
			s := slices.Clone(amplitude)
			sort.Float64s(s)
			for i := range use {
				use[i] = amplitude[i] >= s[len(s)/2]
			}
		}
		for k := range n {
			num, den := 0.0, 0.0
			for i := range depth {
				if w := weight(i, k); use[i] && w > 0 {
					num += w * depth[i][k] * amplitude[i]
					den += w * amplitude[i] * amplitude[i]
				}
			}
			ratio[k], err[k] = math.NaN(), math.NaN()
			if den > 0 {
				ratio[k], err[k] = num/den, 1/math.Sqrt(den)
			}
		}
		// The scale: shapes that count most stay as deep as in the recipe.
		num, den := 0.0, 0.0
		for k := range n {
			if ratio[k] > 0 {
				num += recipe[k] * ratio[k] / (err[k] * err[k])
				den += ratio[k] * ratio[k] / (err[k] * err[k])
			}
		}
		for k := range n {
			ratio[k], err[k] = ratio[k]*num/den, err[k]*num/den
			if math.IsNaN(ratio[k]) {
				ratio[k] = recipe[k]
			}
		}
	}
	for k := range n {
		if math.IsNaN(err[k]) {
			ratio[k] = math.NaN()
		}
	}
	return ratio, err
}
