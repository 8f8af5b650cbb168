package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// Weak lines count together: by hand, sqrt(sum m^2) and sum(m s)/sum(m^2) over the features that do not stand out.
func TestWeakLines(t *testing.T) {
	var s Scratch
	line := func(wave, snr, model float64) LineEvidence {
		return LineEvidence{Wave: wave, Width: 100, SNR: snr, Model: model, Seen: snr >= SeenSNR}
	}
	shade := func(e LineEvidence) LineEvidence { e.Absorption = true; return e }
	for _, c := range []struct {
		name         string
		lines        []LineEvidence
		model, share float64
		parts        int
	}{
		{"none", nil, 0, 1, 0},
		{"one that stands out", []LineEvidence{line(5000, 9, 9)}, 0, 1, 0},
		{"as promised", []LineEvidence{line(5000, 9, 9), line(6000, 3, 3), line(7000, 2, 2)}, math.Sqrt(13), 1, 2},
		{"not there", []LineEvidence{line(5000, 9, 9), line(6000, 0, 3), line(7000, -1, 2)}, math.Sqrt(13), -2.0 / 13, 0},
		{"hardly promised", []LineEvidence{line(5000, 9, 9), line(6000, 0, 0.4)}, 0, 1, 0},
		{"a doublet by its stronger line", []LineEvidence{line(7004, 1, 2), line(7000, 3, 3.5)}, 3.5, 3 / 3.5, 1},
		{"a doublet of which one stands out", []LineEvidence{line(7000, 1, 2), line(7004, 5, 5)}, 0, 1, 0},
		{"emission on absorption", []LineEvidence{line(7000, 5, 5), shade(line(7000, 1, 4))}, 4, 0.25, 0},
	} {
		model, share, parts := s.weakLines(c.lines)
		if math.Abs(model-c.model) > 1e-12 || math.Abs(share-c.share) > 1e-12 || parts != c.parts {
			t.Errorf("%s: %g of which %g in %d, want %g, %g, %d", c.name, model, share, parts, c.model, c.share, c.parts)
		}
	}
}

// Four lines of 3.5 sigma each, none of which stands out, count as one that does; two, with 5 together, do not.
func TestWeakLinesCountTogether(t *testing.T) {
	for _, c := range []struct{ lines, want int }{{4, 1}, {2, 0}, {1, 0}} {
		var s Scratch
		var res Result
		for k := range c.lines {
			res.Lines = append(res.Lines, LineEvidence{Wave: 5000 + 300*float64(k), Width: 100, SNR: 3.5, Model: 3.5})
		}
		s.keeps(&peak{family: &Family{}}, &res)
		if res.LinesSeen != c.want || res.LinesMissing != 0 {
			t.Errorf("%d lines: %d seen, %d missing, want %d and none", c.lines, res.LinesSeen, res.LinesMissing, c.want)
		}
	}
}

// The amplitude of one component alone is unbiased, negative where the data are, and scatters as its error says, beside another that it overlaps.
func TestAmplitudeAlone(t *testing.T) {
	const n, draws, center = 400, 400, 200.0
	r := rand.New(rand.NewPCG(6, 1216))
	fam := &Family{Name: "pair", Widths: []float64{300}, components: []component{
		{name: "one", scale: 1, terms: []term{{name: "Ha", logWave: 3.6 + center*testStep, amp: 1}}},
		{name: "two", scale: 1, terms: []term{{name: "Hb", logWave: 3.6 + (center+6)*testStep, amp: 1}}},
	}}
	l := bareLevel(n)
	var b bench
	var pulls []float64
	mean := 0.0
	for range draws {
		for i := range l.resid {
			l.resid[i] = r.NormFloat64() + gaussianAt(i, center, 300/kmsPixel, 2) + gaussianAt(i, center+6, 300/kmsPixel, -1)
		}
		// One in use, the other held at zero by its sign.
		f := b.evaluate(l, fam, 300, 0)
		f.amp[0], f.amp[1] = 1, 0
		amp, sigma, ok := b.alone(1, &f)
		if !ok {
			t.Fatal("not told")
		}
		mean += amp / draws
		pulls = append(pulls, math.Abs(amp+1)/sigma)
	}
	slices.Sort(pulls)
	// 0.6745 is the median of the absolute value of a unit Gaussian; 400 draws know it, and the mean, to 5 % of sigma: three of that.
	if m := pulls[draws/2]; math.Abs(m-0.6745) > 0.15 {
		t.Errorf("median pull %.3f, want 0.67", m)
	}
	if math.Abs(mean+1) > 0.15 {
		t.Errorf("mean amplitude %.3f, want -1", mean)
	}
}

// Lines of a quasar where Lyman-alpha must be followed by a forest, and is not, are something else: told, and never secure. With the forest nothing is told.
func TestForestIsPromised(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	for _, z := range []float64{3.6, 4.2, 4.5} {
		for _, missing := range []bool{false, true} {
			g := broadLines(11, z, 15)
			if missing {
				r := rand.New(rand.NewPCG(11, 32))
				for i := range g.Flux {
					noise := r.NormFloat64() / 15
					g.Flux[i] = (g.Flux[i]-noise)/hydrogen.Transmission(z, pow10(g.LogWave(i))) + noise
				}
			}
			res := f.Find(g, s)
			DefaultThresholds().Judge(&res)
			if missing && velocity(res.Redshift, z) > 3000 && res.Verdict != Secure {
				continue // something else altogether
			}
			if velocity(res.Redshift, z) > 3000 {
				t.Fatalf("z = %g, forest missing %v: %s at %.4f", z, missing, res.Family, res.Redshift)
			}
			if res.ForestMissing != missing || missing && res.Verdict == Secure {
				t.Errorf("z = %g, forest missing %v: told %v, %v", z, missing, res.ForestMissing, res.Verdict)
			}
		}
	}
}

// Calcium and sodium of our Galaxy in front of a featureless source make no star: of these, five of 150 came out secure when they counted. A
// star with its other lines is one.
func TestGalacticGasIsNoStar(t *testing.T) {
	f := newTestFinder(t, builtInFamilies(t))
	s := f.NewScratch()
	const n = 4400
	r := rand.New(rand.NewPCG(3934, 5892))
	for k := range 40 {
		snr, strength := 25+25*r.Float64(), 0.6+0.9*r.Float64()
		g := &spectrum.Grid{Start: 3.575, Step: testStep, Flux: make([]float64, n), Ivar: make([]float64, n), Independent: n}
		dim := func(rest, depth, width float64) {
			for i := range g.Flux {
				g.Flux[i] *= 1 - gaussianAt(i, (math.Log10(rest)-g.Start)/testStep, width/kmsPixel, depth)
			}
		}
		for i := range g.Flux {
			g.Flux[i] = math.Pow(10, -1.2*(g.LogWave(i)-3.78))
		}
		// Vacuum wavelengths from memory.
		for _, l := range [][2]float64{{3934.78, 0.35}, {3969.59, 0.2}, {5891.58, 0.3}, {5897.56, 0.2}} {
			dim(l[0], strength*l[1], 70)
		}
		star := k%4 == 3
		if star {
			for _, l := range [][2]float64{{3934.78, 0.5}, {3969.59, 0.5}, {4305.6, 0.3}, {5168.8, 0.2}, {5174.1, 0.25}, {5185, 0.3}, {5269, 0.2}, {4384, 0.25}, {4228, 0.25}, {4862.7, 0.2}, {6564.6, 0.2}} {
				dim(l[0], l[1], 160)
			}
		}
		for i := range g.Flux {
			g.Flux[i] += r.NormFloat64() / snr
			g.Ivar[i] = snr * snr
		}
		res := f.Find(g, s)
		DefaultThresholds().Judge(&res)
		if (res.Verdict == Secure) != star {
			t.Errorf("star %v, S/N %.0f: %v %s at %.4f, %d features, foreground %v", star, snr, res.Verdict, res.Family, res.Redshift, res.LinesSeen, res.Foreground)
		}
	}
}

// The families that live on emission lines are known by the lines they expect.
func TestShiningFamilies(t *testing.T) {
	var names []string
	for _, f := range builtInFamilies(t) {
		if f.shining() {
			names = append(names, f.Name)
		}
	}
	if want := []string{"active", "emission", "nebula", "outflow", "quasar"}; !slices.Equal(names, want) {
		t.Errorf("%v, want %v", names, want)
	}
}
