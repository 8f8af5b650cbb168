package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/continuum"
	"duskline/internal/checkvalues"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// drawFamily makes a family of random Gaussians around the pixels of l, with
// emission and absorption and, now and then, a component outside.
func drawFamily(r *rand.Rand, l *level, bounded bool) *Family {
	f := &Family{Name: "drawn", ZMin: -0.1, ZMax: 0.1}
	for c := range 1 + r.IntN(4) {
		comp := component{absorption: r.IntN(2) == 0, scale: 1}
		if bounded && comp.absorption {
			comp.most = 0.2 * r.Float64()
		}
		for range 1 + r.IntN(4) {
			comp.terms = append(comp.terms, term{
				logWave: logWaveAt(l, float64(l.n)*r.Float64()), width: kmsPixel * (1.5 + 10*r.Float64()), amp: 0.2 + r.Float64()})
		}
		if c == 3 {
			for i := range comp.terms {
				comp.terms[i].logWave += 1
			}
		}
		f.components = append(f.components, comp)
	}
	return f
}

// denseFit solves the joint problem of a level with explicit matrices: spline
// and prior as rows of one least-squares system, the spline projected out of
// data and templates by QR.
type denseFit struct {
	design *mat.Dense // weighted spline, with the rows of the prior below
	q      *mat.Dense
	rows   int
}

// newDenseFit takes the level before prepare, whose resid is the flux.
func newDenseFit(l *level, basis continuum.Basis, stiffness, ridge float64) *denseFit {
	size := basis.Size()
	d := &denseFit{rows: l.n + 2*size}
	d.design = mat.NewDense(d.rows, size, nil)
	trace := 0.0
	for i := range l.n {
		j, v := basis.Eval(l.start + float64(i)*l.step)
		for a := range v {
			d.design.Set(i, j+a, math.Sqrt(l.weight[i])*v[a])
			trace += l.weight[i] * v[a] * v[a]
		}
	}
	for i := 0; i+2 < size; i++ {
		for a, v := range []float64{1, -2, 1} {
			d.design.Set(l.n+i, i+a, v*math.Sqrt(ridge*trace/float64(size)))
		}
	}
	for i := 0; i+4 < size && stiffness > 0; i++ {
		// Coefficient k of a uniform cubic spline belongs to knot k-1.
		knot := basis.Low + float64(i+2-1)*(basis.High-basis.Low)/float64(basis.Intervals)
		pixel := max(0, min(l.n-1, int(math.Round((knot-l.start)/l.step))))
		for a, v := range []float64{1, -4, 6, -4, 1} {
			d.design.Set(l.n+size+i, i+a, v/(stiffness*l.cont[pixel]))
		}
	}
	var qr mat.QR
	qr.Factorize(d.design)
	var q mat.Dense
	qr.QTo(&q)
	d.q = mat.DenseCopyOf(q.Slice(0, d.rows, 0, size))
	return d
}

// project returns a weighted column without what the spline can describe.
func (d *denseFit) project(l *level, values []float64) *mat.VecDense {
	y := mat.NewVecDense(d.rows, nil)
	for i, v := range values {
		y.SetVec(i, math.Sqrt(l.weight[i])*v)
	}
	var c, part, out mat.VecDense
	c.MulVec(d.q.T(), y)
	part.MulVec(d.q, &c)
	out.SubVec(y, &part)
	return &out
}

// templates returns the components of f at a shift by definition.
func templates(l *level, f *Family, shift float64) [][]float64 {
	out := make([][]float64, len(f.components))
	for c := range f.components {
		comp := &f.components[c]
		out[c] = make([]float64, l.n)
		for i := range l.n {
			for _, t := range comp.terms {
				out[c][i] += gaussianAt(i, (t.logWave+shift-l.start)/l.step, t.width/(speedOfLight*ln10*l.step), t.amp)
			}
			if comp.absorption {
				out[c][i] *= -l.cont[i]
			}
		}
	}
	return out
}

// drawLevel makes a level of n noisy pixels, some without weight, not yet
// prepared.
func drawLevel(r *rand.Rand, n int) (*level, continuum.Basis) {
	l := &level{n: n, start: 3.6, step: testStep, weight: make([]float64, n), resid: make([]float64, n), cont: make([]float64, n)}
	phase := 6 * r.Float64()
	for i := range n {
		l.cont[i] = 2 + math.Sin(0.02*float64(i)+phase)
		l.resid[i] = l.cont[i] + 0.3*r.NormFloat64()
		l.weight[i] = math.Exp(r.NormFloat64()) / 0.09
		if r.IntN(15) == 0 {
			l.weight[i] = 0
		}
	}
	return l, continuum.NewBasis(logWaveAt(l, 0), logWaveAt(l, float64(n-1)), 30*testStep)
}

// G, h, the drop of chi^2, the norms and the residual are those of dense linear
// algebra.
func TestEvaluateAgainstDense(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 3))
		stiffness := rapid.SampledFrom([]float64{0, 0.03}).Draw(t, "stiffness")
		const ridge = 1e-9
		l, basis := drawLevel(r, 240)
		flux := append([]float64(nil), l.resid...)
		f := drawFamily(r, l, rapid.Bool().Draw(t, "bounded"))
		shift := rapid.Float64Range(-0.002, 0.002).Draw(t, "shift")
		dense := newDenseFit(l, basis, stiffness, ridge)
		if !l.prepare(basis, stiffness, ridge) {
			t.Fatal("the level could not be prepared")
		}
		var b bench
		got := b.evaluate(l, f, 0, shift)

		raw := templates(l, f, shift)
		data := dense.project(l, flux)
		var cols []*mat.VecDense
		var p problem
		for c, values := range raw {
			col := dense.project(l, values)
			// What is outside, or what the spline describes to 1e-4, is no
			// evidence.
			norm, before := mat.Dot(col, col), 0.0
			for i, v := range values {
				before += l.weight[i] * v * v
			}
			if math.Abs(norm/before-1e-4) < 1e-6 {
				t.Skip("on the limit of what counts")
			}
			if before == 0 || norm < 1e-4*before {
				col = nil
			}
			cols = append(cols, col)
			if want := norm; col != nil && math.Abs(b.norm(c)/want-1) > 1e-8 {
				t.Fatalf("norm of component %d: %.12g, want %.12g", c, b.norm(c), want)
			}
		}
		// Products of projected columns against the differences that evaluate
		// takes: relative to the norms, the condition of the normal equations
		// (1e3, with holes 1e5) times 1e-16.
		const tol = 1e-9
		for k := range b.m {
			ck := cols[b.used[k]]
			if ck == nil {
				continue
			}
			if want := mat.Dot(ck, data); math.Abs(b.h[k]-want) > tol*mat.Norm(ck, 2)*mat.Norm(data, 2)+1e-9 {
				t.Fatalf("h of component %d: %.12g, want %.12g", b.used[k], b.h[k], want)
			}
			for e := range b.m {
				ce := cols[b.used[e]]
				if ce == nil {
					continue
				}
				if want := mat.Dot(ck, ce); math.Abs(square(&b.g, b.m)[k][e]-want) > tol*mat.Norm(ck, 2)*mat.Norm(ce, 2)+1e-9 {
					t.Fatalf("G of components %d and %d: %.12g, want %.12g", b.used[k], b.used[e], square(&b.g, b.m)[k][e], want)
				}
			}
		}
		p.m, p.g, p.h, p.most = b.m, b.g, b.h, b.most
		if best := p.best(); math.Abs(got.drop-best) > 1e-7*(1+best) {
			t.Fatalf("drop %.10g, the best of all subsets is %.10g", got.drop, best)
		}
		// The drop is that of the penalized chi^2, and residual is what the
		// spline leaves of data minus templates.
		model := make([]float64, l.n)
		for c, values := range raw {
			for i, v := range values {
				model[i] += got.amp[c] * v
			}
		}
		rest := make([]float64, l.n)
		for i := range rest {
			rest[i] = flux[i] - model[i]
		}
		left := dense.project(l, rest)
		if want := mat.Dot(data, data) - mat.Dot(left, left); math.Abs(got.drop-want) > 1e-7*(1+want) {
			t.Fatalf("drop %.10g, chi^2 falls by %.10g", got.drop, want)
		}
		residual := make([]float64, l.n)
		b.residual(residual, l, &got)
		for i, v := range residual {
			if l.weight[i] == 0 {
				continue
			}
			if want := left.AtVec(i) / math.Sqrt(l.weight[i]); math.Abs(v-want) > 1e-7 {
				t.Fatalf("residual of pixel %d: %.10g, want %.10g", i, v, want)
			}
		}
	})
}

// Chi^2 over lags of the example in testdata/chi2_lags.csv (numpy 1.24, direct
// sums; the setup is in its second line).
func TestChi2OverLags(t *testing.T) {
	rows := checkvalues.Rows(t, "testdata/chi2_lags.csv")
	const n = 64
	full := func(i, lag int) float64 { // the template without a reach, zero-padded
		if i-lag < 0 || i-lag >= n {
			return 0
		}
		u, v := float64(i-lag-20)/2, float64(i-lag-33)/3
		return 0.8*math.Exp(-0.5*u*u) + 0.5*math.Exp(-0.5*v*v)
	}
	l := bareLevel(n)
	chi0 := 0.0
	for i := range n {
		// circshift by 7: the template is nothing beyond pixel 56.
		l.resid[i] = 1.7*full(i, 7) + 0.05*math.Sin(1.3*float64(i))
		e := 0.1 + 0.05*math.Cos(0.2*float64(i))
		l.weight[i] = 1 / (e * e)
		if i >= 40 && i <= 42 {
			l.weight[i] = 0
		}
		chi0 += l.weight[i] * l.resid[i] * l.resid[i]
	}
	f := &Family{ZMin: -0.1, ZMax: 0.1, components: []component{{scale: 1, terms: []term{
		{logWave: logWaveAt(l, 20), width: 2 * kmsPixel, amp: 0.8}, {logWave: logWaveAt(l, 33), width: 3 * kmsPixel, amp: 0.5}}}}}
	var b bench
	bestLag, least := 0, math.Inf(1)
	for _, row := range rows[1:] {
		var v [4]float64
		for k := range v {
			v[k] = checkvalues.Number(t, row[k])
		}
		lag, amplitude, chi2, sigma := int(v[0]), v[1], v[2], v[3]
		// The table by its own definition: 12 digits are printed.
		sums := func(template func(i int) float64) (a, chi, err float64) {
			num, den := 0.0, 0.0
			for i := range n {
				num += l.weight[i] * template(i) * l.resid[i]
				den += l.weight[i] * template(i) * template(i)
			}
			return num / den, chi0 - num*num/den, 1 / math.Sqrt(den)
		}
		a, chi, e := sums(func(i int) float64 { return full(i, lag) })
		if math.Abs(a-amplitude) > 1e-10 || math.Abs(chi-chi2) > 1e-8 || math.Abs(e-sigma) > 1e-10 {
			t.Errorf("lag %d by direct sums: %.12g, %.12g, %.12g, the table says %.12g, %.12g, %.12g", lag, a, chi, e, amplitude, chi2, sigma)
		}
		// Ours draws a Gaussian to 4 sigma: the same sums with what it draws.
		// (TestGaussianAgainstExponential looks at the drawing; here the rims
		// fall on pixels, on either side by rounding.)
		var d drawing
		f.components[0].draw(&d, n, l.start, l.step, float64(lag)*testStep, 0)
		cut := func(i int) float64 { return d.values[i] }
		got := b.evaluate(l, f, 0, float64(lag)*testStep)
		a, chi, e = sums(cut)
		if g := 1 / math.Sqrt(b.norm(0)); math.Abs(got.amp[0]-a) > 1e-9 || math.Abs(chi0-got.drop-chi) > 1e-7 || math.Abs(g-e) > 1e-9 {
			t.Errorf("lag %d: %.12g, %.12g, %.12g, direct sums say %.12g, %.12g, %.12g", lag, got.amp[0], chi0-got.drop, g, a, chi, e)
		}
		// What the cut leaves out is below exp(-8) = 3.4e-4 of a peak on each
		// pixel: with weights up to 400, data up to 1.4 and a norm of 220 to
		// 900, less than 0.002 of the amplitude and 0.5 of a chi^2 of some
		// hundreds.
		if math.Abs(got.amp[0]-amplitude) > 0.002 || math.Abs(chi0-got.drop-chi2) > 0.5 || math.Abs(1/math.Sqrt(b.norm(0))/sigma-1) > 0.001 {
			t.Errorf("lag %d: amplitude %.6f, chi^2 %.4f, the table says %.6f, %.4f", lag, got.amp[0], chi0-got.drop, amplitude, chi2)
		}
		if chi := chi0 - got.drop; chi < least {
			bestLag, least = lag, chi
		}
	}
	if bestLag != 7 || len(rows) != 32 {
		t.Errorf("the least chi^2 of %d lags is at %d, want 7 of 31", len(rows)-1, bestLag)
	}
}

// climb finds the maximum of a smooth drop below the pixel, and stays in the
// redshift range.
func TestClimb(t *testing.T) {
	const n, truth = 400, 203.37
	l := bareLevel(n)
	for i := range n {
		l.resid[i] = gaussianAt(i, truth, 4, 1)
	}
	f := &Family{ZMin: -0.01, ZMax: 0.01, components: []component{{scale: 1, terms: []term{{logWave: logWaveAt(l, 200), width: 4 * kmsPixel, amp: 1}}}}}
	var b bench
	p := peak{family: f, shift: 0}
	p.fit = b.evaluate(l, f, 0, 0)
	b.climb(l, &p, testStep, 8)
	// The vertex of a parabola through three points of a Gaussian one pixel
	// apart is off by up to 0.06/(2*4^2) of a pixel, and pixels that come in and
	// go out at the rim of the template change the drop by exp(-8): a hundredth
	// of a pixel, 0.7 km/s, where families claim 18 at best.
	if got := p.shift / testStep; math.Abs(got-3.37) > 0.01 {
		t.Errorf("climbed to %.5f pixels, want 3.37", got)
	}
	// Neither a step nor the vertex may leave the range.
	for _, end := range []float64{2.5, 3.1} {
		f.ZMin, f.ZMax = -0.01, math.Pow(10, end*testStep)-1
		p = peak{family: f, shift: 0}
		p.fit = b.evaluate(l, f, 0, 0)
		b.climb(l, &p, testStep, 8)
		if p.shift > end*testStep {
			t.Errorf("climbed to %.3f pixels, out of a range that ends at %g", p.shift/testStep, end)
		}
		f.ZMin, f.ZMax = math.Pow(10, (6.7-end)*testStep)-1, 0.01
		p = peak{family: f, shift: 7 * testStep}
		p.fit = b.evaluate(l, f, 0, p.shift)
		b.climb(l, &p, testStep, 8)
		if p.shift < (6.7-end)*testStep {
			t.Errorf("climbed to %.3f pixels, out of a range that begins at %g", p.shift/testStep, 6.7-end)
		}
	}
}

// A binned level keeps summed weight, summed flux and chi^2 of what does not
// change within a bin.
func TestBin(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	fine, _ := drawLevel(r, 403)
	var coarse level
	coarse.bin(fine, 4)
	if coarse.n != 101 || math.Abs(coarse.step-4e-4) > 1e-18 {
		t.Fatalf("%d pixels of %g, want 101 of 4e-4", coarse.n, coarse.step)
	}
	// The center of the first bin is the mean of the centers of its pixels.
	if want := logWaveAt(fine, 1.5); math.Abs(coarse.start-want) > 1e-15 {
		t.Errorf("starts at %v, want %v", coarse.start, want)
	}
	var w, wf, cw, cwf float64
	for i := range fine.n {
		w += fine.weight[i]
		wf += fine.weight[i] * fine.resid[i]
	}
	for i := range coarse.n {
		cw += coarse.weight[i]
		cwf += coarse.weight[i] * coarse.resid[i]
	}
	if math.Abs(cw/w-1) > 1e-12 || math.Abs(cwf/wf-1) > 1e-12 {
		t.Errorf("weight %g and weighted flux %g, want %g and %g", cw, cwf, w, wf)
	}
	if want := (fine.cont[400] + fine.cont[401] + fine.cont[402]) / 3; math.Abs(coarse.cont[100]-want) > 1e-12 {
		t.Errorf("continuum of the short last bin %g, want %g", coarse.cont[100], want)
	}
}

// The floor adds a fraction of the mean flux around to the errors.
func TestWeightFloor(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 4))
	const n, half = 200, 15
	flux, ivar, floor, got := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range n {
		flux[i], ivar[i], floor[i] = 10+r.NormFloat64(), 25*r.Float64(), 0.02*float64(1+i%3)
		if r.IntN(5) == 0 {
			flux[i], ivar[i] = 1e9, 0
		}
	}
	weightFloor(got, flux, ivar, floor, half)
	for i := range n {
		sum, count := 0.0, 0
		for k := max(0, i-half); k <= min(n-1, i+half); k++ {
			if ivar[k] > 0 {
				sum += flux[k]
				count++
			}
		}
		want := 0.0
		if ivar[i] > 0 {
			e := floor[i] * sum / float64(count)
			want = 1 / (1/ivar[i] + e*e)
		}
		if math.Abs(got[i]-want) > 1e-10*want {
			t.Errorf("weight %d: %g, want %g", i, got[i], want)
		}
	}
}

func TestFillBands(t *testing.T) {
	g := blank(5000)
	values := append([]float64(nil), g.Ivar...)
	fillBands(values, g, [][2]float64{{5565, 5590}, {100, 3601}, {11000, 20000}}, 0.25)
	for i, v := range values {
		x := math.Pow(10, g.LogWave(i))
		inside := x >= 5565 && x <= 5590 || x <= 3601 || x >= 11000
		if want := map[bool]float64{true: 0.25, false: 1}[inside]; v != want {
			t.Errorf("pixel at %.2f Angstrom has %g, want %g", x, v, want)
		}
	}
}

func BenchmarkEvaluate(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 9))
	l, _ := drawLevel(r, 4600)
	if !l.prepare(continuum.NewBasis(logWaveAt(l, 0), logWaveAt(l, 4599), 63*testStep), 0.03, 1e-9) {
		b.Fatal("the level could not be prepared")
	}
	for _, f := range builtInFamilies(b) {
		b.Run(f.Name, func(b *testing.B) {
			var bn bench
			b.ReportAllocs()
			for b.Loop() {
				bn.evaluate(l, f, f.Widths[0], math.Log10(1+0.5*(f.ZMin+f.ZMax)))
			}
		})
	}
}
