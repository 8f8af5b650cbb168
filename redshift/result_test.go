package redshift

import (
	"math"
	"math/rand/v2"
	"testing"
)

// evidenceOf finds the redshift of an emission-line galaxy and returns the
// evidence by line name.
func evidenceOf(t *testing.T, z, width, height float64, change func(flux []float64)) (Result, map[string]LineEvidence) {
	t.Helper()
	f := newTestFinder(t, builtInFamilies(t))
	g := emissionLines(t, rand.New(rand.NewPCG(9, 9)), z, width, height)
	if change != nil {
		change(g.Flux)
	}
	res := f.Find(g, f.NewScratch())
	if !res.Found || res.Family != "emission" || velocity(res.Redshift, z) > 100 {
		t.Fatalf("a galaxy at %.4f was found as %s at %.4f", z, res.Family, res.Redshift)
	}
	lines := map[string]LineEvidence{}
	for _, e := range res.Lines {
		// The emission of a name that may stand for absorption beneath as well.
		if e.Model > lines[e.Name].Model && e.Width == width {
			lines[e.Name] = e
		}
	}
	return res, lines
}

// A line's signal-to-noise is its height times the norm of its profile over
// the noise; it stands at its wavelength with an error that noise explains.
func TestEvidence(t *testing.T) {
	const z, width, height = 0.1, 90.0, 10.0
	res, lines := evidenceOf(t, z, width, height, nil)
	list := builtInLines(t)
	for name, ratio := range map[string]float64{"Ha": 2.86, "Hb": 1, "OIII_5007": 1, "OIII_4959": 0.34} {
		e, ok := lines[name]
		if !ok {
			t.Errorf("no evidence of %s", name)
			continue
		}
		// The square norm of a Gaussian of unit height is sqrt(pi) sigma in
		// pixels. Noise adds one; the template error of 2 % of the local flux
		// (mean over 31 pixels, up to 9) takes up to 2 % of it, the noise
		// scaled by what the best model leaves up to 2 % more.
		want := height * ratio * math.Sqrt(math.Sqrt(math.Pi)*width/kmsPixel)
		if math.Abs(e.SNR-want) > 4+0.04*want || math.Abs(e.Model-want) > 4+0.04*want {
			t.Errorf("%s: S/N %.1f, the model says %.1f, want %.1f", name, e.SNR, e.Model, want)
		}
		line, _ := list.Find(name)
		if got := e.Wave / (line.Wave * (1 + res.Redshift)); math.Abs(got-1) > 1e-12 {
			t.Errorf("%s stands at %.4f", name, e.Wave)
		}
		// The error of a center is sigma sqrt(2)/(S/N) for a Gaussian.
		if want := width * math.Sqrt2 / e.SNR; math.Abs(e.Err/want-1) > 0.1 || math.Abs(e.Offset) > 4*e.Err {
			t.Errorf("%s: %.1f +- %.1f km/s from its place, want +- %.1f", name, e.Offset, e.Err, want)
		}
		if e.Width != width {
			t.Errorf("%s: width %g km/s", name, e.Width)
		}
	}
	if res.LinesSeen < 5 || res.LinesMissing != 0 || res.Scattered || res.LinesCovered != 6 || res.LinesExpected != 6 {
		t.Errorf("seen %d, missing %d, scattered %v, %d of %d covered", res.LinesSeen, res.LinesMissing, res.Scattered, res.LinesCovered, res.LinesExpected)
	}
	// Chi^2 of 4,600 pixels is known to 2 %; the template floor takes a little.
	if math.Abs(res.Chi2Dof-1) > 0.1 {
		t.Errorf("chi^2 per degree of freedom %.3f of a good fit", res.Chi2Dof)
	}
}

// A line that the model demands and the data lack is missing; one that is
// moved says so.
func TestEvidenceAgainst(t *testing.T) {
	const z, width, height = 0.1, 90.0, 20.0
	list := builtInLines(t)
	pixel := func(name string) float64 {
		l, ok := list.Find(name)
		if !ok {
			t.Fatalf("no line %s", name)
		}
		return (math.Log10(l.Wave*(1+z)) - math.Log10(3600)) / testStep
	}
	add := func(flux []float64, center, height float64) {
		var d drawing
		d.reset(len(flux))
		gaussian(&d, len(flux), center, width/kmsPixel, height)
		for i, v := range d.values {
			flux[i] += v
		}
	}
	res, lines := evidenceOf(t, z, width, height, func(flux []float64) { add(flux, pixel("Hb"), -height) })
	if res.LinesMissing == 0 || !(lines["Hb"].SNR < lines["Hb"].Model/3) {
		t.Errorf("H beta was taken out: %d missing, evidence %+v", res.LinesMissing, lines["Hb"])
	}
	const off = 130 // km/s
	_, lines = evidenceOf(t, z, width, height, func(flux []float64) {
		for _, name := range []string{"OIII_5007", "OIII_4959"} {
			h := map[string]float64{"OIII_5007": height, "OIII_4959": 0.34 * height}[name]
			add(flux, pixel(name), -h)
			add(flux, pixel(name)+off/kmsPixel, h)
		}
	})
	// For equal Gaussians the ratio of the two matched filters is the shift
	// itself; pixels of three quarters of a sigma and four sigma of noise.
	a, b := lines["OIII_5007"], lines["Ha"]
	if got := a.Offset - b.Offset; math.Abs(got-off) > 4*math.Hypot(a.Err, b.Err)+0.05*off {
		t.Errorf("[O III] was moved by %d km/s against H alpha, found %.0f", off, got)
	}
}

// Lines scatter when their offsets exceed three times what errors and 0.35 of
// the template's width allow, in the mean over those that are strong.
func TestScattered(t *testing.T) {
	line := func(name string, snr, offset, err float64) LineEvidence {
		return LineEvidence{Name: name, SNR: snr, Offset: offset, Err: err}
	}
	const width, limit = 100.0, 3 * 35.0
	for _, c := range []struct {
		name  string
		lines []LineEvidence
		want  bool
	}{
		{"none", nil, false},
		{"one far off", []LineEvidence{line("a", 20, 500, 1)}, false},
		{"two far off", []LineEvidence{line("a", 20, 500, 1), line("b", 20, -500, 1)}, true},
		{"two just inside", []LineEvidence{line("a", 20, limit-1, 0), line("b", 20, 1-limit, 0)}, false},
		{"two just outside", []LineEvidence{line("a", 20, limit+1, 0), line("b", 20, -1-limit, 0)}, true},
		{"two with large errors", []LineEvidence{line("a", 20, 200, 100), line("b", 20, -200, 100)}, false},
		{"weak ones", []LineEvidence{line("a", 5, 500, 1), line("b", 5, -500, 1)}, false},
		{"bumps", []LineEvidence{line("", 20, 500, 1), line("", 20, -500, 1)}, false},
		{"without an offset", []LineEvidence{line("a", 20, math.NaN(), 1), line("b", 20, 500, 1)}, false},
	} {
		if got := scattered(c.lines, width); got != c.want {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
}

// r is the height of the correlation over sqrt(2) sigma_a with sigma_a^2 =
// sum over N lags of (c(k) - c(-k))^2/(2 N), Tonry & Davis 1979, from memory.
func TestRStatAgainstDirectSums(t *testing.T) {
	r := rand.New(rand.NewPCG(12, 5))
	const n = 900
	l := noisyLevel(r, n)
	lines := []struct {
		pixel int
		amp   float64
	}{{430, 1}, {470, 0.6}}
	comp := component{scale: 1, width: rungSigma(3) * kmsPixel}
	for _, q := range lines {
		comp.terms = append(comp.terms, term{logWave: logWaveAt(l, float64(q.pixel)), amp: q.amp})
		for i := range n {
			l.resid[i] += 2 * gaussianAt(i, float64(q.pixel), rungSigma(3), q.amp)
		}
	}
	f := &Finder{}
	s := f.NewScratch()
	s.full = *l
	s.scan.resp.reset(&s.full)
	p := &peak{family: &Family{components: []component{comp}}}
	p.fit.amp[0] = 2
	got := f.rStat(s, p)
	const half = n / 2
	corr := func(k int) float64 {
		sum := 0.0
		for _, q := range lines {
			if at := q.pixel + k; at < 0 || at >= n {
				continue // a line off the spectrum does not count
			}
			for i := range n {
				u := float64(i-q.pixel-k) / rungSigma(3)
				sum += 2 * q.amp * math.Exp(-0.5*u*u) * l.weight[i] * l.resid[i]
			}
		}
		return sum
	}
	sum := 0.0
	for k := -half; k <= half; k++ {
		d := corr(k) - corr(-k)
		sum += d * d
	}
	want := corr(0) / (math.Sqrt2 * math.Sqrt(sum/(2*2*half)))
	// The filter ends at 3.5 sigma: exp(-6.1) of noise.
	if math.Abs(got/want-1) > 0.01 {
		t.Errorf("r = %.4f, direct sums say %.4f", got, want)
	}
}

// Pixels outside the searched wavelengths weigh nothing where enough are
// inside, and all of them where too few are.
func TestLimitRange(t *testing.T) {
	opt := DefaultOptions()
	opt.MinPixels, opt.SearchFrom, opt.SearchTo = 100, 4500, 5000
	f := &Finder{opt: opt}
	l := bareLevel(2000)
	f.limitRange(l)
	for i, w := range l.weight {
		x := math.Pow(10, logWaveAt(l, float64(i)))
		if (w > 0) != (x >= 4500 && x <= 5000) {
			t.Fatalf("pixel at %.2f Angstrom weighs %g", x, w)
		}
	}
	f.opt.SearchFrom = 4990 // nine pixels inside
	l = bareLevel(2000)
	f.limitRange(l)
	for i, w := range l.weight {
		if w == 0 {
			t.Fatalf("pixel %d of a spectrum with too few inside lost its weight", i)
		}
	}
}

// No pixel counts for more than the cap in the first ranking, above or below
// the continuum; the others keep their weight.
func TestCapOutliers(t *testing.T) {
	l := bareLevel(100)
	for i := range l.resid {
		l.cont[i], l.resid[i], l.weight[i] = 10, 10+float64(i%16)-7.5, 4
	}
	l.resid[50], l.resid[60] = -1000, 1e200
	capOutliers(l)
	for i, w := range l.weight {
		q := w * (l.cont[i] - l.resid[i]) * (l.cont[i] - l.resid[i])
		far := 2 * math.Abs(l.cont[i]-l.resid[i])
		switch {
		case far > outlierCap && q > outlierCap*outlierCap*(1+1e-12):
			t.Errorf("pixel %d counts for %g", i, q)
		case far <= outlierCap && w != 4:
			t.Errorf("pixel %d at %g sigma weighs %g", i, far, w)
		}
	}
}

// A line that two components put at different places is one line where these lie
// within the width of a blend, with its area, center and variance; else two.
func TestTracesBlendShiftedParts(t *testing.T) {
	const kms = 1000.0
	for _, c := range []struct {
		apart float64 // km/s
		want  int
	}{{0, 1}, {1500, 1}, {1999, 1}, {2001, 2}} {
		f := &Family{}
		for k, amp := range []float64{1, 3} {
			f.components = append(f.components, component{scale: 1, terms: []term{
				{name: "x", amp: amp, logWave: 3.2 - float64(k)*c.apart/(speedOfLight*ln10)}}})
		}
		p := peak{family: f, width: kms}
		p.fit.amp[0], p.fit.amp[1] = 2, 2
		got := p.traces(nil)
		if len(got) != c.want {
			t.Fatalf("%g km/s apart: %d lines, want %d", c.apart, len(got), c.want)
		}
		if c.want == 2 {
			continue
		}
		sigma := math.Sqrt(kms*kms + 3.0/16*c.apart*c.apart)
		if g := got[0]; math.Abs(g.kms/sigma-1) > 1e-12 || math.Abs(g.amp*g.kms/(8*kms)-1) > 1e-12 ||
			math.Abs((3.2-g.logWave)*ln10*speedOfLight-0.75*c.apart) > 1e-6 || g.breadth != kms {
			t.Errorf("%g km/s apart: %+v, want sigma %g, area %g, the center at 3/4", c.apart, g, sigma, 8*kms)
		}
	}
}
