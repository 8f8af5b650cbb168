package redshift

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"duskline/spectrum"
)

// combs are invented features of a composite: wavelength, depth and Gaussian
// sigma in km/s. Nothing in nature has them, so that no built-in family does.
var combs = [][3]float64{
	{3950, 0.35, 300}, {4020, -0.25, 350}, {4180, 0.3, 250}, {4433, 0.2, 400}, {4610, -0.3, 300},
	{4790, 0.25, 300}, {4905, 0.3, 350}, {5230, -0.2, 300}, {5420, 0.35, 300}, {5511, 0.2, 300},
}

// comb returns the flux over continuum of the invented composite.
func comb(wave float64) float64 {
	v := 1.0
	for _, f := range combs {
		u := math.Log(wave/f[0]) * speedOfLight / f[2]
		v -= f[1] * math.Exp(-0.5*u*u)
	}
	return v
}

func combGrid() *spectrum.Grid {
	g := &spectrum.Grid{Start: 3.57, Step: CompositeStep}
	for i := range 1900 {
		g.Flux, g.Ivar = append(g.Flux, comb(pow10(g.LogWave(i)))), append(g.Ivar, 1)
	}
	return g
}

func newComb(t testing.TB) *Composite {
	t.Helper()
	c, err := NewComposite(combGrid(), "0123456789abcdef")
	if err != nil {
		t.Fatal(err)
	}
	return c
}

const combRecipe = `
name = "comb"
class = "galaxy"
redshift = [0.0, 0.6]
widths = [300.0]
[[component]]
name = "teeth"
kind = "absorption"
most = 2.0
source = "invented"
stack = "comb.fits"
`

func combFamily(t testing.TB) *Family {
	t.Helper()
	f, err := ParseRecipeWith("comb.toml", []byte(combRecipe), builtInLines(t), func(path string) (*Composite, error) {
		if path != "comb.fits" {
			t.Errorf("the recipe asks for %q", path)
		}
		return newComb(t), nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// A component with a stack is the composite less one, at any redshift, between
// its faded ends.
func TestCompositeIsDrawn(t *testing.T) {
	f := combFamily(t)
	for _, z := range []float64{0, 0.2345} {
		shift := math.Log10(1 + z)
		var d drawing
		start := 3.6 + shift + 0.3e-4 // off the nodes
		f.components[0].draw(&d, 1700, start, testStep, shift, 300)
		for i, v := range d.values {
			want := comb(pow10(start+float64(i)*testStep-shift)) - 1
			// Linear interpolation over a pixel h of a Gaussian of sigma s:
			// h^2/8s^2 = 0.0098 of its height of 0.35 at s = 3.6 pixels.
			if math.Abs(v-want) > 0.0035 {
				t.Fatalf("z = %g, pixel %d: drawn %.5f, want %.5f", z, i, v, want)
			}
		}
	}
}

func TestNewCompositeRefuses(t *testing.T) {
	spoil := func(change func(g *spectrum.Grid)) *spectrum.Grid {
		g := combGrid()
		change(g)
		return g
	}
	for _, c := range []struct {
		name, want string
		g          *spectrum.Grid
	}{
		{"another step", "step", spoil(func(g *spectrum.Grid) { g.Step = 2e-4 })},
		{"few pixels", "99 usable pixels", spoil(func(g *spectrum.Grid) { clear(g.Ivar[99:]) })},
		{"outside the range", "0 usable pixels", spoil(func(g *spectrum.Grid) { g.Start = 5 })},
		{"in units of flux", "not divided by its continuum", spoil(func(g *spectrum.Grid) {
			for i := range g.Flux {
				g.Flux[i] *= 1e-17
			}
		})},
		{"not a number", "NaN", spoil(func(g *spectrum.Grid) { g.Flux[7] = math.NaN() })},
		{"without end", "+Inf", spoil(func(g *spectrum.Grid) { g.Flux[7] = math.Inf(1) })},
		{"a continuum", "no features", spoil(func(g *spectrum.Grid) {
			for i := range g.Flux {
				g.Flux[i] = 1
			}
		})},
	} {
		if _, err := NewComposite(c.g, "x"); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one that says %q", c.name, err, c.want)
		}
	}
}

// What a continuum takes up does not count as a feature; lines are left.
func TestHighPass(t *testing.T) {
	n := 3000
	have, wave, line, dst := make([]bool, n), make([]float64, n), make([]float64, n), make([]float64, n)
	sigma := smoothing / tableStep
	for i := range n {
		have[i] = true
		wave[i] = math.Sin(2 * math.Pi * float64(i) / (20 * sigma))
		u := float64(i-n/2) / 4
		line[i] = math.Exp(-0.5 * u * u)
	}
	highPass(dst, wave, have, sigma)
	// A wave of period P keeps 1 - exp(-2 (pi s/P)^2) = 0.048 of its height at
	// P = 20 s; the kernel cut at 3 sigma changes that by less than 0.01.
	for i := n / 4; i < 3*n/4; i++ {
		if math.Abs(dst[i]) > 0.06 {
			t.Fatalf("%.3f of a slow wave is left at pixel %d", dst[i], i)
		}
	}
	highPass(dst, line, have, sigma)
	// The smoothed line is 4/sqrt(4^2+125^2) = 0.032 high.
	if got := dst[n/2]; math.Abs(got-0.968) > 0.002 {
		t.Errorf("%.4f of a narrow line is left, want 0.968", got)
	}
}

func TestFade(t *testing.T) {
	values, have := make([]float64, 200), make([]bool, 200)
	for i := range values {
		values[i], have[i] = 1, i != 120
	}
	values[120] = 0
	fade(values, have)
	for i, want := range map[int]float64{0: 1.0 / taper, 14: 15.0 / taper, 60: 1, 119: 1.0 / taper, 120: 0, 121: 1.0 / taper, 199: 1.0 / taper} {
		if math.Abs(values[i]-want) > 1e-12 {
			t.Errorf("pixel %d is %.4f of itself, want %.4f", i, values[i], want)
		}
	}
}

// The correlations by FFT are the sums they stand for, at lags of whole bins.
func TestDenseCorrelationIsTheSum(t *testing.T) {
	c := newComb(t)
	l := bareLevel(1600)
	l.start = 3.6
	r := rand.New(rand.NewPCG(7, 1))
	for i := range l.resid {
		l.resid[i], l.weight[i], l.cont[i] = r.NormFloat64(), r.Float64(), 1+r.Float64()
	}
	var s denseScan
	s.load(l)
	k := s.kernel(c)
	factor := l.bins()
	if factor != 4 {
		t.Fatalf("%d pixels a bin, want 4 of 1e-4 dex", factor)
	}
	// Sums by definition over bins.
	bins := l.n / factor
	x, w := make([]float64, bins), make([]float64, bins)
	for i := range l.n {
		x[i/factor] += l.weight[i] * l.resid[i] * l.cont[i]
		w[i/factor] += l.weight[i] * l.cont[i] * l.cont[i]
	}
	teeth := (c.high.to - c.high.from) / factor
	shape, square := make([]float64, teeth), make([]float64, teeth)
	for j := range teeth {
		for q := range factor {
			v := c.high.values[c.high.from+j*factor+q] / float64(factor)
			shape[j] += v
			square[j] += v * v * float64(factor)
		}
	}
	num, den := make([]float64, 1), make([]float64, 1)
	for _, d := range []int{-400, -100, -7, 0, 1, 13, 200, 390} {
		var wantNum, wantDen float64
		for j := range teeth {
			if i := j + d; i >= 0 && i < bins {
				wantNum += x[i] * shape[j]
				wantDen += w[i] * square[j]
			}
		}
		s.correlate(num, den, l, c, s.start-k.start+float64(d)*s.step)
		// Rounding: of the transforms, and a lag that is whole to 1e-12 of a bin.
		if math.Abs(num[0]-wantNum) > 1e-8 || math.Abs(den[0]-wantDen) > 1e-8 {
			t.Errorf("lag %d: %.10f and %.10f, want %.10f and %.10f", d, num[0], den[0], wantNum, wantDen)
		}
	}
	// No overlap, no evidence.
	s.correlate(num, den, l, c, 0.7)
	if num[0] != 0 || den[0] != 0 {
		t.Errorf("beside the spectrum: %g and %g", num[0], den[0])
	}
}

// A redshift is found by a composite alone, and its features are counted.
func TestFindByComposite(t *testing.T) {
	families := append(builtInFamilies(t), combFamily(t))
	finder := newTestFinder(t, families)
	s := finder.NewScratch()
	r := rand.New(rand.NewPCG(7, 2))
	for _, z := range []float64{0.0312, 0.21, 0.4567} {
		g := blank(4000)
		const sigma = 0.08 // S/N of 12 a pixel
		for i := range g.Flux {
			wave := pow10(g.LogWave(i))
			g.Flux[i] = (1+0.2*math.Sin(wave/2000))*comb(wave/(1+z)) + sigma*r.NormFloat64()
			g.Ivar[i] = 1 / (sigma * sigma)
		}
		res := finder.Find(g, s)
		if res.Family != "comb" {
			t.Errorf("z = %g: family %s at %.4f", z, res.Family, res.Redshift)
			continue
		}
		// Ten features of 0.2 to 0.35 at S/N 12 give about 10 km/s; five times that.
		if v := speedOfLight * (res.Redshift - z) / (1 + z); math.Abs(v) > 50 {
			t.Errorf("z = %g: found %.5f, off by %.0f km/s", z, res.Redshift, v)
		}
		if res.LinesSeen < 3 || res.LinesSeen > len(combs) {
			t.Errorf("z = %g: %d features seen of %d", z, res.LinesSeen, len(combs))
		}
		if !(res.RStat > 3) { // Tonry & Davis 1979: reliable from r of 3 on
			t.Errorf("z = %g: r = %.1f", z, res.RStat)
		}
	}
}

// A spectrum over its continuum is the template again.
func TestNormalize(t *testing.T) {
	finder := newTestFinder(t, builtInFamilies(t))
	s := finder.NewScratch()
	g := blank(3000)
	for i := range g.Flux {
		wave := pow10(g.LogWave(i))
		g.Flux[i], g.Ivar[i] = 3e-17*wave/5000*comb(wave), 1e38
	}
	g.Ivar[500] = 0
	var got spectrum.Grid
	if !finder.Normalize(&got, g, s) {
		t.Fatal("a plain spectrum cannot be fitted")
	}
	if got.Start != g.Start || got.Step != g.Step || got.Len() != g.Len() || got.Ivar[500] != 0 {
		t.Errorf("the grid is %g %g %d, the dead pixel weighs %g", got.Start, got.Step, got.Len(), got.Ivar[500])
	}
	// Clear of features the continuum is not known better than the spline, which
	// the features pull by some percent.
	for i := 1900; i < 2700; i++ {
		if got.Ivar[i] == 0 {
			continue // the night-sky band
		}
		if d := got.Flux[i] - comb(pow10(g.LogWave(i))); math.Abs(d) > 0.02 {
			t.Fatalf("pixel %d: %.4f off", i, d)
		}
	}
	// Weights hold the template error of 2 %.
	if w := got.Ivar[2100]; math.Abs(w*0.02*0.02-1) > 0.05 {
		t.Errorf("weight %.0f, want 2500", w)
	}
	if finder.Normalize(&got, blank(50), s) {
		t.Error("50 pixels were fitted")
	}
}

func TestStackRecipes(t *testing.T) {
	list := builtInLines(t)
	give := func(string) (*Composite, error) { return newComb(t), nil }
	parse := func(text string, stacks Stacks) (*Family, error) {
		return ParseRecipeWith("comb.toml", []byte(text), list, stacks)
	}
	for _, c := range []struct {
		name, old, replacement, want string
		stacks                       Stacks
	}{
		{"built in", "", "", `component "teeth": stack = "comb.fits"`, nil},
		{"emission", `"absorption"`, `"emission"`, `component "teeth": stack = "comb.fits" multiplies the continuum: kind must be absorption`, give},
		{"unreadable", "", "", `comb.toml: component "teeth": stack = "comb.fits": gone`, func(string) (*Composite, error) { return nil, errGone }},
		{"unknown key", "most =", "moist =", `comb.toml: component "teeth": unknown keys are refused: component.moist in line 9`, give},
		{"wrong type", "most = 2.0", `most = "much"`, `comb.toml: component "teeth": line 9`, give},
		{"wrong type before", "widths = [300.0]", `widths = "wide"`, "comb.toml: line 5", give},
	} {
		_, err := parse(strings.Replace(combRecipe, c.old, c.replacement, 1), c.stacks)
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one that says %q", c.name, err, c.want)
		}
	}
	// An unknown key leaves the other problems to be seen.
	_, err := parse(strings.NewReplacer("most =", "moist =", `"galaxy"`, `"planet"`).Replace(combRecipe), give)
	if err == nil || len(strings.Split(err.Error(), "\n")) != 2 {
		t.Errorf("not two problems:\n%v", err)
	}
	// The digest covers text and composite.
	a, _ := parse(combRecipe, give)
	b, _ := parse(combRecipe, func(string) (*Composite, error) {
		return NewComposite(combGrid(), "fedcba9876543210")
	})
	if a == nil || b == nil || a.Digest == b.Digest {
		t.Error("another composite leaves the digest as it is")
	}
	if again, _ := parse(combRecipe, give); again.Digest != a.Digest {
		t.Error("the digest changes from one parse to the next")
	}
}

var errGone = goneError{}

type goneError struct{}

func (goneError) Error() string { return "gone" }

// The correlation of one composite with one spectrum at all lags to z = 7: the
// transforms of the spectrum are shared by all composites of a run.
func BenchmarkDenseScan(b *testing.B) {
	c := newComb(b)
	l := bareLevel(4600)
	for i := range l.resid {
		l.resid[i] = math.Sin(float64(i * i))
	}
	num, den := make([]float64, 9000), make([]float64, 9000)
	b.Run("fft", func(b *testing.B) {
		var s denseScan
		s.load(l)
		for b.Loop() {
			s.correlate(num, den, l, c, 0)
		}
	})
	b.Run("spectrum", func(b *testing.B) {
		var s denseScan
		for b.Loop() {
			s.load(l)
		}
	})
	// What the transforms replace: the sum of each lag over the same bins.
	b.Run("direct", func(b *testing.B) {
		n, m := l.n/4, (c.high.to-c.high.from)/4
		data, shape := make([]float64, n), make([]float64, m)
		for b.Loop() {
			for d := range len(num) / 4 {
				var a, q float64
				for j := max(0, d-n+1); j < m && j+d < n; j++ {
					a += data[j+d] * shape[j]
					q += data[j+d] * shape[j] * shape[j]
				}
				num[d], den[d] = a, q
			}
		}
	})
}
