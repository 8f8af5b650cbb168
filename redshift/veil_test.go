package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// veiled is a family of a broad line of height 1 at the wavelength, with the forest where
// a zone of proximity in km/s is not negative.
func veiled(wave, proximity float64) *Family {
	f := &Family{Name: "veiled", Class: "quasar", ZMin: 2, ZMax: 6.5, Widths: []float64{2600}}
	f.components = []component{{scale: 1, terms: []term{{name: "L", logWave: math.Log10(wave), amp: 1}}}}
	if proximity >= 0 {
		f.components = append(f.components, component{scale: 1, absorption: true, forest: true})
		f.forested, f.proximity = true, math.Log10(1+proximity/speedOfLight)
	}
	return f
}

// seriesNear reports whether a rest wavelength is within a pixel of the table of a line
// of the Lyman series, where the transmission jumps.
func seriesNear(wave float64) bool {
	for n := 2; n <= 40; n++ {
		tr, err := hydrogen.NewTransition(1, n)
		if err == nil && math.Abs(math.Log10(wave/tr.Wave)) < 1.01*forestStep {
			return true
		}
	}
	return false
}

// What an emission line of a family with a forest is drawn as, in the fit and for
// people alike: its Gaussian times the mean transmission of the intergalactic medium,
// whose edges stand blueward by the zone that the quasar thins. Without a forest it is
// the Gaussian alone.
func TestEmissionBehindTheForest(t *testing.T) {
	const n, step = 3000, 1e-4
	for _, c := range []struct{ wave, z, proximity float64 }{
		{1215.67, 3, 0}, {1215.67, 3, 1000}, {1215.67, 6, 1000}, {1215.67, 5, 5000}, {1034, 3.2, 1000}, {1215.67, 3, -1}, {1549, 4, 1000},
	} {
		f := veiled(c.wave, c.proximity)
		shift := math.Log10(1 + c.z)
		l := bareLevel(n)
		l.start = math.Log10(c.wave*0.75) + shift
		for i := range l.cont {
			l.cont[i] = 2
		}
		var b bench
		b.draw(l, f, 2600, shift)
		first := pow10(l.start - shift)
		curve := f.Curve(0, c.z, 2600, first, pow10(logWaveAt(l, n-1)-shift), n)
		veiledPixels := 0
		for i := range n {
			rest := pow10(logWaveAt(l, float64(i)) - shift)
			moved := rest * (1 + math.Max(0, c.proximity)/speedOfLight)
			if seriesNear(moved) {
				continue
			}
			want := gaussianAt(i, (math.Log10(c.wave)+shift-l.start)/step, 2600/kmsPixel, 1)
			if math.Abs(math.Abs(away(rest, c.wave))/2600-reach) < 0.03 {
				continue // the rim
			}
			trans := 1.0
			if c.proximity >= 0 {
				trans = hydrogen.Transmission(c.z, moved*(1+c.z))
			}
			if want > 0.01 && trans < 0.9 {
				veiledPixels++
			}
			want *= trans
			// The table of the forest is good to 0.01, see TestForestAgainstTransmission.
			if got := b.draws[0].values[i]; math.Abs(got-want) > 0.01 {
				t.Errorf("line at %g, z = %g, zone of %g km/s: %.4f at rest %.2f, want %.4f", c.wave, c.z, c.proximity, got, rest, want)
				break
			}
			if math.Abs(curve[i]-want) > 0.01 {
				t.Errorf("line at %g, z = %g, zone of %g km/s, as shown: %.4f at rest %.2f, want %.4f", c.wave, c.z, c.proximity, curve[i], rest, want)
				break
			}
			if c.proximity < 0 {
				continue
			}
			// The forest itself, a share of the continuum at 1310 Angstrom.
			if got := b.draws[1].values[i] / 2; math.Abs(got-(trans-1)) > 0.01 {
				t.Errorf("z = %g, zone of %g km/s: the forest takes %.4f at rest %.2f, want %.4f", c.z, c.proximity, got, rest, trans-1)
				break
			}
		}
		if behind := c.proximity >= 0 && c.wave < 1216; behind != (veiledPixels > 20) {
			t.Errorf("line at %g, z = %g: %d pixels behind the forest", c.wave, c.z, veiledPixels)
		}
	}
}

// A band head is half way up at its wavelength, full depth half a width further, gone
// three widths before, with its tail to the side that it says.
func TestHeadIsHalfWayUpAtItsWavelength(t *testing.T) {
	for _, blue := range []bool{false, true} {
		h := head{Wave: 7056, Depth: 0.8, Tail: 170, Blue: blue}
		side := 1.0
		if blue {
			side = -1
		}
		at := func(x float64) float64 { return h.at(7056 + side*x) }
		// headHalf is 2.5 for 3 sqrt(ln 2) = 2.498.
		if got := at(0); math.Abs(got-0.4) > 0.001 {
			t.Errorf("blue %v: depth %.4f at the head, want 0.4", blue, got)
		}
		if got := at(2.5); math.Abs(got-0.8) > 0.001 {
			t.Errorf("blue %v: depth %.4f beyond the head, want 0.8", blue, got)
		}
		if got := at(2.5 + 170); math.Abs(got-0.8/math.E) > 0.001 {
			t.Errorf("blue %v: depth %.4f a tail further, want 0.8/e", blue, got)
		}
		if at(-6.6) != 0 || !(at(-3) < 0.1) {
			t.Errorf("blue %v: depths %.4f, %.4f before the head", blue, at(-6.6), at(-3))
		}
		for x := -8.0; x < 2.4; x += 0.1 {
			if at(x+0.1) < at(x) {
				t.Errorf("blue %v: falls at %.1f before its full depth", blue, x)
			}
		}
	}
}

// breakGrid is a power law behind the mean forest at z, without a line, at a
// signal-to-noise ratio a pixel redward of Lyman-alpha; 0 for no noise.
func breakGrid(seed uint64, z, snr float64) *spectrum.Grid {
	r := rand.New(rand.NewPCG(seed, 31))
	g := blank(4600)
	for i := range g.Flux {
		wave := pow10(g.LogWave(i))
		g.Flux[i] = math.Pow(wave/8000, -0.5) * hydrogen.Transmission(z, wave)
		g.Ivar[i] = 400
		if snr > 0 {
			g.Flux[i] += r.NormFloat64() / snr
			g.Ivar[i] = snr * snr
		}
	}
	return g
}

// The break of the forest alone is among the trial redshifts of forested families and
// their broadest lines, within a step of the sweep, 2,200 km/s, at a signal-to-noise ratio
// of 1 within two: the climb that follows reaches 7,800.
func TestSweepFindsTheBreak(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	step := sweepStep * roughFactor * testStep
	for _, snr := range []float64{0, 5, 1} {
		for k, z := range []float64{3.8, 4, 4.5, 5, 5.5, 6, 6.5} {
			var res Result
			if !f.prepare(breakGrid(uint64(k), z, snr), s, &res) {
				t.Fatal(res.Reason)
			}
			f.sweep(s)
			near, reach := math.Inf(1), step
			if snr == 1 {
				reach *= 2
			}
			for _, x := range s.breaks {
				near = math.Min(near, math.Abs(x-math.Log10(1+z)))
			}
			if len(s.breaks) == 0 || len(s.breaks) > sweepKept || near > reach {
				t.Errorf("z = %g, S/N %g: nearest break %.4f dex away, of %d", z, snr, near, len(s.breaks))
			}
		}
	}
	// Without a family that has a forest nothing is swept.
	var plain []*Family
	for _, fam := range f.families {
		if !fam.forested {
			plain = append(plain, fam)
		}
	}
	f = newTestFinder(t, plain)
	var res Result
	s.breaks = append(s.breaks[:0], 1)
	if !f.prepare(breakGrid(1, 5, 5), s, &res) {
		t.Fatal(res.Reason)
	}
	if f.sweep(s); len(s.breaks) != 0 {
		t.Errorf("%d breaks without a forest", len(s.breaks))
	}
}

// Breaks are tried by families with a forest, at their broadest lines, in their range.
func TestWithBreaks(t *testing.T) {
	s := (&Finder{}).NewScratch()
	s.breaks = []float64{math.Log10(1 + 3.0), math.Log10(1 + 4.5), math.Log10(1 + 6.2)}
	for _, c := range []struct {
		forested bool
		width    float64
		want     []float64
	}{{true, 2600, s.breaks[1:2]}, {true, 1100, nil}, {false, 2600, nil}} {
		s.shifts = append(s.shifts[:0], 0.3)
		s.withBreaks(&Family{ZMin: 4, ZMax: 5, Widths: []float64{1100, 2600, 500}, forested: c.forested}, c.width)
		if want := append([]float64{0.3}, c.want...); !slices.Equal(s.shifts, want) {
			t.Errorf("forest %v, lines of %g km/s: shifts %v, want %v", c.forested, c.width, s.shifts, want)
		}
	}
}

// On binned pixels the best peaks of broad lines are climbed: they stand no lower than
// trial redshifts a quarter of a line's width to either side.
func TestBroadPeaksAreClimbed(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	n, top := 0, 0
	for _, z := range []float64{0.9, 1.2, 1.7, 2.1, 2.4, 2.8, 3.1, 3.6, 4.4, 5.2} {
		g := broadLines(5, z, 8)
		var res Result
		if !f.prepare(g, s, &res) {
			t.Fatal(res.Reason)
		}
		s.scan.reset(&s.full)
		s.scanCoarse.reset(&s.coarse)
		f.sweep(s)
		for index, fam := range f.families {
			if fam.Name != "quasar" {
				continue
			}
			const width = 2600.0
			s.peaks = s.peaks[:0]
			f.nominate(s, index, width)
			best := slices.MinFunc(s.peaks, byScore)
			if v := velocity(best.z(), z); v > 2000 {
				t.Errorf("z = %g: the best peak is %.0f km/s away", z, v)
			}
			d := 0.25 * width / (speedOfLight * ln10)
			for _, p := range s.peaks[:climbed] {
				n++
				left, right := s.bench.evaluate(&s.coarse, fam, width, p.shift-d), s.bench.evaluate(&s.coarse, fam, width, p.shift+d)
				if left.gain <= p.fit.gain && right.gain <= p.fit.gain {
					top++
				}
			}
		}
	}
	// Without the climb 37 of 50 are maxima. A climb ends after eight steps.
	if n != 50 || top < 48 {
		t.Errorf("%d of %d peaks are maxima", top, n)
	}
}

// broadLines is a power law behind the mean forest with the strongest lines of quasars,
// 2,600 km/s wide, fluxes over that of C IV from memory, Vanden Berk et al. 2001.
func broadLines(seed uint64, z, snr float64) *spectrum.Grid {
	r := rand.New(rand.NewPCG(seed, 32))
	g := blank(4600)
	for i := range g.Flux {
		wave := pow10(g.LogWave(i))
		f := math.Pow(wave/8000, -0.5)
		line := 0.0
		for _, q := range [][2]float64{{1215.67, 3}, {1240, 0.4}, {1397, 0.3}, {1546, 0.9}, {1906, 0.5}, {2799, 0.4}, {4862.7, 0.4}} {
			u := away(wave/(1+z), q[0]) / 2600
			line += q[1] * math.Exp(-0.5*u*u)
		}
		g.Flux[i] = f*(1+line)*hydrogen.Transmission(z, wave) + r.NormFloat64()/snr
		g.Ivar[i] = snr * snr
	}
	return g
}
