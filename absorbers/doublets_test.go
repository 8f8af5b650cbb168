package absorbers

import (
	"math"
	"math/rand/v2"
	"testing"
)

// bare returns a flat, noiseless spectrum of a survey redward of 4000 Angstrom
// with the Gaussian lines given as rest wavelength at z, rest equivalent width,
// and sigma in km/s.
func bare(sn float64, lines ...[4]float64) Arm {
	var a Arm
	for i := range 3600 {
		w := 4000 * math.Exp(float64(i)*69/c)
		f := 1 + 0.2*math.Sin(w/700)
		for _, l := range lines {
			mu := l[0] * (1 + l[1])
			s := mu * l[3] / c
			depth := l[2] * (1 + l[1]) / (math.Sqrt(2*math.Pi) * s)
			f *= math.Exp(-depth * math.Exp(-0.5*(w-mu)*(w-mu)/(s*s)))
		}
		a.Wave, a.Flux, a.Ivar = append(a.Wave, w), append(a.Flux, f), append(a.Ivar, sn*sn)
	}
	a.Resolution = []float64{2000}
	return a
}

func noisyCopy(a Arm, r *rand.Rand) Arm {
	b := a
	b.Flux = append([]float64(nil), a.Flux...)
	for i := range b.Flux {
		b.Flux[i] += r.NormFloat64() / math.Sqrt(a.Ivar[i])
	}
	return b
}

func widthOf(a Arm, lo, hi, z float64) float64 {
	w := 0.0
	for i := range a.Wave {
		if a.Wave[i] > lo && a.Wave[i] < hi {
			w += (1 - a.Flux[i]/(1+0.2*math.Sin(a.Wave[i]/700))) * a.Wave[i] * 69 / c
		}
	}
	return w / (1 + z)
}

// Doublets of every ion come out at their place with their equivalent widths.
// 120 spectra each: the standard error of a mean pull is 0.09, of a deviation
// 6.5 %.
func TestDoublets(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	for _, tc := range []struct {
		kind         string
		strong, weak float64
		z, zEm       float64
	}{{MgII, 2796.3522, 2803.5310, 1.1, 1.9}, {CIV, 1548.204, 1550.781, 2.4, 2.6}, {SiIV, 1393.755, 1402.77, 2.9, 3.0}, {AlIII, 1854.716, 1862.79, 2.0, 2.2}} {
		lines := [][4]float64{{tc.strong, tc.z, 1.2, 90}, {tc.weak, tc.z, 0.75, 90}}
		if tc.kind == AlIII { // never without C IV
			lines = append(lines, [4]float64{1548.204, tc.z, 1.8, 90}, [4]float64{1550.781, tc.z, 1.4, 90})
		}
		clean := bare(12, lines...)
		m1, m2 := tc.strong*(1+tc.z), tc.weak*(1+tc.z)
		mid := 0.5 * (m1 + m2)
		w1, w2 := widthOf(clean, m1-min(20, mid-m1), min(mid, m1+20), tc.z), widthOf(clean, max(mid, m2-20), m2+20, tc.z)
		r := rand.New(rand.NewPCG(31, 7))
		var p1, p2 tally
		found, extra := 0, 0
		const n = 120
		for range n {
			for _, s := range f.Find(nil, []Arm{noisyCopy(clean, r)}, Options{Z: tc.zEm}, &sc) {
				if tc.kind == AlIII && s.Kind == CIV {
					continue
				}
				if s.Kind != tc.kind || math.Abs(s.Z-tc.z)*c/(1+tc.z) > 100 {
					extra++
					continue
				}
				found++
				p1.add(s.EW-w1, s.EWErr)
				p2.add(s.Second-w2, s.SecondErr)
				if d := math.Abs(s.Z-tc.z) * c / (1 + tc.z); d > 30 && d > 4*s.ZErr*c/(1+tc.z) {
					t.Errorf("%s: %.0f km/s off", tc.kind, d)
				}
			}
		}
		t.Logf("%s: %d of %d, %d extra; W %.3f: pulls %.2f +- %.2f, W %.3f: %.2f +- %.2f", tc.kind, found, n, extra, w1, p1.pull/p1.found, p1.pullSD(),
			w2, p2.pull/p2.found, p2.pullSD())
		if found < n-2 {
			t.Errorf("%s: found in %d of %d", tc.kind, found, n)
		}
		if extra > n/10 {
			t.Errorf("%s: %d others found", tc.kind, extra)
		}
		for _, p := range []tally{p1, p2} {
			if m, sd := p.pull/p.found, p.pullSD(); math.Abs(m) > 0.4 || sd < 0.74 || sd > 1.26 { // four standard errors
				t.Errorf("%s: pulls %.2f +- %.2f", tc.kind, m, sd)
			}
		}
	}
}

// Noise alone, and lines without a partner, make no doublets to speak of.
func TestNoDoublets(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	clean := bare(15, [4]float64{2600, 1, 1.5, 90}, [4]float64{2853, 1, 1.5, 90}, [4]float64{1670, 1.8, 1.0, 90})
	r := rand.New(rand.NewPCG(33, 7))
	n := 0
	for range 100 {
		n += len(f.Find(nil, []Arm{noisyCopy(clean, r)}, Options{Z: 2.1}, &sc))
	}
	if n > 8 {
		t.Errorf("%d doublets in 100 spectra without any", n)
	}
	t.Logf("%d doublets in 100 spectra without any", n)
}

// A pair at the distance and in the ratio of Al III is not one where C IV is covered
// at its redshift and is weaker.
func TestAloneAlIII(t *testing.T) {
	f := fullFinder(t)
	const z = 2.0
	pair := [][4]float64{{1854.716, z, 1.2, 90}, {1862.79, z, 0.75, 90}}
	r := rand.New(rand.NewPCG(35, 7))
	kinds := func(a Arm) string {
		names := ""
		for _, s := range f.Find(nil, []Arm{noisyCopy(a, r)}, Options{Z: 2.2}, nil) {
			names += s.Kind + " "
		}
		return names
	}
	if got := kinds(bare(20, pair...)); got != "" {
		t.Errorf("without C IV: %s", got)
	}
	if got := kinds(bare(20, append(pair, [4]float64{1548.204, z, 1.8, 90}, [4]float64{1550.781, z, 1.4, 90})...)); got != "CIV AlIII " {
		t.Errorf("with C IV: %s", got)
	}
}

// Behind a background with lines of its own those lines are no systems, while
// doublets in front of it are.
func TestOwnLines(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(39, 7))
	for _, tc := range []struct {
		z    float64
		own  Background
		want int
	}{{1.0, BeforeQuasar, 1}, {1.0, BeforeGalaxy, 1}, {1.198, BeforeQuasar, 1}, {1.198, BeforeGalaxy, 0}} {
		a := noisyCopy(bare(20, [4]float64{2796.3522, tc.z, 1.2, 90}, [4]float64{2803.531, tc.z, 0.9, 90}), r)
		got := f.Find(nil, []Arm{a}, Options{Z: 1.2, Before: tc.own}, nil)
		if len(got) != tc.want {
			t.Errorf("redshift %g, background %v: %+v", tc.z, tc.own, got)
		}
	}
}

// A line of something else beside one of the two does not enter its sum: the
// other line tells what the doublet can have there.
func TestForeignLine(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	f := fullFinder(t)
	const z = 1.1
	pair := [][4]float64{{2796.3522, z, 1.0, 60}, {2803.531, z, 0.7, 60}}
	r := rand.New(rand.NewPCG(36, 7))
	foreign := [4]float64{2796.3522 * (1 + 320/c), z, 0.8, 60}
	alone, beside := bare(40, pair...), bare(40, append(pair, foreign)...)
	const n = 120
	var width [2]tally
	for range n {
		for k, a := range []Arm{alone, beside} {
			for _, s := range f.Find(nil, []Arm{noisyCopy(a, r)}, Options{Z: 1.9}, nil) {
				if s.Kind == MgII && math.Abs(s.Z-z)*c/(1+z) < 100 {
					width[k].add(s.EW, s.EWErr)
				}
			}
		}
	}
	// Beside a deep line 8 of 600 are refused as another pair.
	if width[0].found < n || width[1].found < n-6 {
		t.Errorf("%.0f and %.0f of %d found", width[0].found, width[1].found, n)
	}
	pure, blended := width[0].sum/width[0].found, width[1].sum/width[1].found
	t.Logf("W = %.3f alone, %.3f beside a line of 0.8", pure, blended)
	// Without the limit the sum has half of the other line more.
	if math.Abs(blended-pure) > 0.15 {
		t.Errorf("W = %.3f alone, %.3f beside another line", pure, blended)
	}
}

// Errors that are too small by a factor of three over some 250 pixels, as beside
// sky lines and in telluric bands, make few doublets; the rest keeps its errors. 1,200
// spectra had 0.09 in each, at the ends of the stretch: 22 of 240, and four times the root.
func TestDistrustedErrors(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(37, 7))
	made := 0
	var sc Scratch
	const n = 240
	for range n {
		a := noisyCopy(bare(20), r)
		for i := 1500; i < 1750; i++ {
			a.Flux[i] += 0.15 * r.NormFloat64()
		}
		made += len(f.Find(nil, []Arm{a}, Options{Z: 2.5}, &sc))
		if lowered := sc.track.weight[1600] / a.Ivar[1600]; lowered > 0.3 || sc.track.weight[3000] < 0.5*a.Ivar[3000] {
			t.Fatalf("weights lowered by %.2f in the bad stretch, %.2f elsewhere", lowered, sc.track.weight[3000]/a.Ivar[3000])
		}
	}
	if made > 40 {
		t.Errorf("%d doublets made of noise in %d spectra", made, n)
	}
}

// Noise that neighbors share makes means of many pixels worse by as much: a
// running mean over two pixels has rho_1 = 1/2, so that the variance of a mean of
// many is 1 + 2 rho_1 = 2 times that of independent ones of the same scatter.
func TestNoiseMemory(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(38, 7))
	var sc Scratch
	for _, want := range []float64{1, 2} {
		a := bare(20)
		last := r.NormFloat64()
		for i := range a.Flux {
			next := r.NormFloat64()
			if want == 1 {
				a.Flux[i] += 0.05 * next
			} else {
				a.Flux[i] += 0.05 * (last + next) / math.Sqrt2
			}
			last = next
		}
		f.Find(nil, []Arm{a}, Options{Z: 2.5}, &sc)
		// Standard error of the sum of three correlations of 3,000 pixels: 0.06;
		// clipping takes from the tails.
		if math.Abs(sc.metal.memory-want) > 0.3 {
			t.Errorf("memory %.2f, want %.1f", sc.metal.memory, want)
		}
	}
}

// Arms that overlap are cut in the middle of the overlap; one inside another is
// left out.
func TestArmsEndToEnd(t *testing.T) {
	whole := bare(20)
	cut := func(i, j int) Arm {
		return Arm{Wave: whole.Wave[i:j], Flux: whole.Flux[i:j], Ivar: whole.Ivar[i:j], Resolution: whole.Resolution}
	}
	var s Scratch
	s.lay([]Arm{cut(900, 2000), cut(0, 1000), cut(1200, 1300)})
	if n := len(s.track.x); n != 2000 && n != 1999 && n != 2001 {
		t.Fatalf("%d pixels of 2000", n)
	}
	for i := 1; i < len(s.track.x); i++ {
		if !(s.track.x[i] > s.track.x[i-1]) {
			t.Fatalf("pixel %d does not increase", i)
		}
	}
}
