package redshift

import (
	"math"
	"math/rand/v2"
	"testing"
)

// One wild pixel adds to chi2_dof what worstPixel sigmas are, no more; one below the
// cap all that it is.
func TestChi2DofIsCapped(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	base := f.Find(emissionLines(t, rand.New(rand.NewPCG(9, 9)), 0.1, 90, 10), s)
	dof := 4600.0 - 120 // spline and components take some 100 of the pixels
	for _, c := range []struct{ sigmas, want float64 }{{20, 400}, {100, 900}, {1e6, 900}} {
		g := emissionLines(t, rand.New(rand.NewPCG(9, 9)), 0.1, 90, 10)
		g.Flux[2000] += c.sigmas
		res := f.Find(g, s)
		if !res.Found || velocity(res.Redshift, 0.1) > 100 {
			t.Fatalf("a pixel of %g sigma: %s at %.4f", c.sigmas, res.Family, res.Redshift)
		}
		// The pixel had noise of its own, up to 3 sigma, is lowered by the template
		// error of 2 % of the flux around it, and pulls the spline. At a million sigma
		// that error is the pixel itself over 31.
		got, slack := (res.Chi2Dof-base.Chi2Dof)*dof, 6*math.Min(c.sigmas, 30)
		if got > c.want+slack || c.sigmas < 1e5 && got < c.want-slack {
			t.Errorf("a pixel of %g sigma adds %.0f to chi^2, want %.0f", c.sigmas, got, c.want)
		}
	}
}

// The light of a quasar that is lost just blueward of Lyman-alpha, exp(-tau) with
// tau = 1.026e-4 (1+z)^5.5 of the forest and 5.39e-5 (1+z)^3 of damped absorbers from
// z = 4.7 on, below 1.690e-2 (1+z)^1.2 up to 1.2, 2.354e-3 (1+z)^3.7 between, and
// 1.617e-4 (1+z)^2 for damped ones below 2 (Inoue et al. 2014, table 2, from memory; the
// parts meet at 1.2 and 4.7).
func TestEdgeDoubt(t *testing.T) {
	lost := func(z float64) float64 {
		x := 1210 * (1 + z) / 1215.67 // 1 + the redshift of the gas
		tau := 1.690e-2 * math.Pow(x, 1.2)
		switch {
		case x >= 5.7:
			tau = 1.026e-4 * math.Pow(x, 5.5)
		case x >= 2.2:
			tau = 2.354e-3 * math.Pow(x, 3.7)
		}
		if x < 3 {
			return 1 - math.Exp(-tau-1.617e-4*x*x)
		}
		return 1 - math.Exp(-tau-5.390e-5*x*x*x)
	}
	l := bareLevel(4600)
	for _, z := range []float64{2.3, 3, 4, 5, 6, 6.5} {
		l.start = math.Log10(1100 * (1 + z))
		p := peak{family: veiled(1215.67, 1000), shift: math.Log10(1 + z)}
		want := 1500 * lost(z) * lost(z)
		// The constants are given to four digits.
		if got := p.edgeDoubt(l); math.Abs(got-want) > 2 {
			t.Errorf("z = %g: %.1f km/s, want %.1f", z, got, want)
		}
		if z == 6 && math.Abs(want-1470) > 10 {
			t.Errorf("at z = 6 the formula of this test says %.0f km/s", want)
		}
		p.family = veiled(1215.67, 0)
		if got := p.edgeDoubt(l); got != 0 {
			t.Errorf("z = %g: %g km/s without a zone", z, got)
		}
		p.family = veiled(1215.67, 1000)
		l.start = math.Log10(1220 * (1 + z))
		if got := p.edgeDoubt(l); got != 0 {
			t.Errorf("z = %g: %g km/s where Lyman-alpha is not covered", z, got)
		}
	}
}

// The doubt of the edge is in the error of a redshift, in quadrature.
func TestEdgeDoubtIsInTheError(t *testing.T) {
	const z = 5.5
	var zone, none *Family
	for _, f := range builtInFamilies(t) {
		if f.Name == "quasar" {
			own := *f
			zone, none = f, &own
		}
	}
	// The forest stays where it is, but with a zone too small to doubt it.
	g := broadLines(7, z, 20)
	errs := map[*Family]float64{}
	for _, fam := range []*Family{zone, none} {
		f := newTestFinder(t, []*Family{fam})
		s := f.NewScratch()
		var res Result
		if !f.prepare(g, s, &res) {
			t.Fatal(res.Reason)
		}
		p := peak{family: fam, width: 2600, shift: math.Log10(1 + z)}
		p.fit = s.bench.evaluate(&s.full, fam, p.width, p.shift)
		if fam == none {
			fam.proximity = 0
		}
		errs[fam] = speedOfLight * f.redshiftError(s, &p) / (1 + z)
	}
	// 1,500 km/s times the square of 0.94 of the light lost, see TestEdgeDoubt; the
	// statistical error of either is below 200.
	added := math.Sqrt(errs[zone]*errs[zone] - errs[none]*errs[none])
	if !(math.Abs(added-1400) < 100) {
		t.Errorf("%.0f km/s with a zone, %.0f without: %.0f added, want some 1,400", errs[zone], errs[none], added)
	}
}

// Of a line in two components Width is that of the higher part, Breadth that of the part
// with more flux.
func TestBreadth(t *testing.T) {
	part := func(width, amp float64) component {
		return component{scale: 1, width: width, terms: []term{{name: "Ha", logWave: 3.8, amp: amp}}}
	}
	for _, c := range []struct {
		name           string
		a, b           component
		ampA, ampB     float64
		width, breadth float64
	}{
		{"a narrow core on a broad base", part(100, 1), part(2000, 1), 10, 2, 100, 2000},
		{"the same the other way around", part(2000, 1), part(100, 1), 2, 10, 100, 2000},
		{"a core with most of the flux", part(100, 1), part(2000, 1), 50, 2, 100, 100},
		{"a high broad line", part(100, 1), part(2000, 1), 1, 2, 2000, 2000},
		{"ratios count", part(100, 1), part(2000, 0.1), 10, 2, 100, 100},
		{"one is not there", part(100, 1), part(2000, 1), 10, 0, 100, 100},
	} {
		p := peak{family: &Family{components: []component{c.a, c.b}}, width: 300}
		p.fit.amp[0], p.fit.amp[1] = c.ampA, c.ampB
		got := p.traces(nil)
		if len(got) != 1 || got[0].kms != c.width || got[0].breadth != c.breadth {
			t.Errorf("%s: %+v, want %g and %g km/s", c.name, got, c.width, c.breadth)
		}
		if want := c.ampA*c.a.terms[0].amp + c.ampB*c.b.terms[0].amp; got[0].amp != want {
			t.Errorf("%s: amplitude %g, want %g", c.name, got[0].amp, want)
		}
	}
	_, lines := evidenceOf(t, 0.1, 90, 10, nil)
	if b := lines["OIII_5007"].Breadth; b != 90 {
		t.Errorf("[O III] of 90 km/s has a breadth of %g", b)
	}
}

// With a fit given, the components active there and no others are used, at no price.
func TestSolveKeepsTheActiveSet(t *testing.T) {
	l := bareLevel(600)
	r := rand.New(rand.NewPCG(2, 6))
	for i := range l.resid {
		l.resid[i] = 10*gaussianAt(i, 150, 4, 1) + 5*gaussianAt(i, 300, 4, 1) + 0.8*gaussianAt(i, 450, 4, 1) + 0.1*r.NormFloat64()
	}
	f := &Family{ZMin: -0.1, ZMax: 0.1}
	for _, k := range []float64{150, 300, 450} {
		f.components = append(f.components, component{scale: 1, width: 4 * kmsPixel, terms: []term{{logWave: logWaveAt(l, k), amp: 1}}})
	}
	l.price = 50 // the third is worth 0.8^2 sqrt(pi) 4 = 4.5, the second 177
	var b bench
	free := b.evaluate(l, f, 0, 0)
	if free.active != 2 || free.amp[2] != 0 {
		t.Fatalf("amplitudes %v at a price of 50", free.amp[:3])
	}
	// The price does not take out what has become cheap, and what is dear stays out.
	l.price = 1000
	if got := b.solve(l, f, 0, 0, &free); got.active != 2 || math.Abs(got.drop-free.drop) > 1e-9 {
		t.Errorf("amplitudes %v with the set of %v at a price of 1000", got.amp[:3], free.amp[:3])
	}
	l.price = 0.1
	if got := b.solve(l, f, 0, 0, &free); got.active != 2 || got.amp[2] != 0 || math.Abs(got.drop-free.drop) > 1e-9 {
		t.Errorf("amplitudes %v with the set of %v at a price of 0.1", got.amp[:3], free.amp[:3])
	}
}

// The error of a redshift is the scatter of repeated observations, for absorption
// families of many components that come and go with the noise as for emission
// (TestRedshiftErrorPulls). The spectra are the template itself with noise.
func TestRedshiftErrorIsTheScatter(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	for _, c := range []struct {
		family string
		z, snr float64
		depths map[string]float64
	}{
		{"passive", 0.2, 6, map[string]float64{"metals": 0.35, "balmer_absorption": 0.1, "break_4000": 0.3, "OII": 0.1}},
		{"postburst", 0.3, 8, map[string]float64{"young": 0.4, "old": 0.12}},
		{"late", 0, 8, map[string]float64{"metals": 0.3, "balmer_absorption": 0.15, "sodium": 0.15, "calcium_triplet": 0.2}},
	} {
		var fam Family
		for _, f := range builtInFamilies(t) {
			if f.Name == c.family {
				fam = *f
			}
		}
		fam.floor = 0
		g := blank(4600)
		clean := make([]float64, g.Len())
		for i := range clean {
			clean[i] = 1
		}
		first, last := pow10(g.Start)/(1+c.z), pow10(g.LogWave(g.Len()-1))/(1+c.z)
		for k := range fam.components {
			a := c.depths[fam.components[k].name]
			for i, v := range fam.Curve(k, c.z, fam.Widths[0], first, last, g.Len()) {
				clean[i] += a * v
			}
		}
		f := newTestFinder(t, []*Family{&fam})
		s := f.NewScratch()
		r := rand.New(rand.NewPCG(11, 3))
		const n = 150
		square := 0.0
		for range n {
			for i := range g.Flux {
				g.Flux[i], g.Ivar[i] = clean[i]+r.NormFloat64()/c.snr, c.snr*c.snr
			}
			res := f.Find(g, s)
			pull := (res.Redshift - c.z) / res.RedshiftErr
			if !(math.Abs(pull) < 6) {
				t.Fatalf("%s: z = %.5f found as %.5f with an error of %.5f", c.family, c.z, res.Redshift, res.RedshiftErr)
			}
			square += pull * pull
		}
		rms := math.Sqrt(square / n)
		t.Logf("%s at S/N %g: rms of the pulls %.3f", c.family, c.snr, rms)
		// Known to 5.8 %; four of that.
		if math.Abs(rms-1) > 4*0.058 {
			t.Errorf("%s at S/N %g: rms of the pulls %.3f", c.family, c.snr, rms)
		}
	}
}
