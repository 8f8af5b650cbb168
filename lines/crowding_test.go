package lines

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"duskline/linelist"
)

// forest returns an arm of the given range whose light is 1 where nothing absorbs, with dips of
// random depth, on the average one every spacing km/s, sigma wide. The
// continuum given is the mean of what is left, as a stiff spline has it.
func forest(from, to, spacing, sigma, noise float64, rng *rand.Rand, lines ...profileTruth) Arm {
	n := int(math.Log(to/from) * c / 69)
	wave := make([]float64, n)
	for i := range wave {
		wave[i] = from * math.Exp(69*float64(i)/c)
	}
	var dips []profileTruth
	for w := from; w < to; w *= 1 + spacing/c*(0.5+rng.Float64()) {
		s := w * sigma / c
		dips = append(dips, profileTruth{w, s, -(0.1 + 0.4*rng.Float64()) * s * math.Sqrt(2*math.Pi)})
	}
	clean := newArm(wave, 1, noise, dips...)
	mean := 0.0
	for _, f := range clean.Flux {
		mean += f / float64(n)
	}
	lit := newArm(wave, 1, noise, append(dips, lines...)...)
	for i := range lit.Cont {
		lit.Cont[i] = mean
	}
	var a Arm
	noisy(&a, lit, rng)
	return a
}

// rest makes a Gaussian of peak and sigma, km/s, at a rest wavelength.
func rest(wave, sigma, peak float64) profileTruth {
	s := wave * sigma / c
	return profileTruth{wave, s, peak * s * math.Sqrt(2*math.Pi)}
}

// waveOf returns the wavelength of a line of the list.
func waveOf(t *testing.T, m *Meter, name string) float64 {
	t.Helper()
	i := m.find(name)
	if i < 0 {
		t.Fatalf("no line %s", name)
	}
	return m.lines[i].Wave
}

// Between absorption lines that crowd nothing shines, wherever the list has a line. Held against
// the noise alone, 22 % of these rows say emission; allowed is one in a hundred.
func TestNoEmissionBetweenDips(t *testing.T) {
	m := fullMeter(t)
	rng := rand.New(rand.NewPCG(31, 1))
	var s Scratch
	rows, wrong := 0, 0
	for range 20 {
		for _, sigma := range []float64{150, 400, 900} {
			a := forest(3600, 7200, 4*sigma, sigma, 0.02, rng)
			for _, r := range m.Measure(nil, []Arm{a}, Options{}, &s) {
				if rows++; r.Kind == Emission {
					wrong++
				}
			}
		}
	}
	t.Logf("%d of %d rows in emission", wrong, rows)
	if wrong > rows/100 {
		t.Errorf("%d of %d rows say emission", wrong, rows)
	}
}

// Real emission of stars stands among absorption: narrow Balmer lines of a flare star
// between bands, broad ones of a cataclysmic variable, H-delta alone as in pulsating red stars,
// broad He II of a Wolf-Rayet star. Equivalent widths hold to 20 %, what the dips around take away from a
// continuum given as their mean, and 4 errors.
func TestEmissionOfStarsStays(t *testing.T) {
	m := fullMeter(t)
	star := func(l *linelist.Line) bool { return l.Seen != "emission" || l.Ion == "He II" }
	for _, tc := range []struct {
		what            string
		spacing, depths float64 // of the absorption, km/s
		sigma, peak     float64 // of the emission
		names, also     []string
	}{
		{"flare star", 1500, 300, 60, 3, []string{"Ha", "Hb", "Hg", "Hd"}, nil},
		{"cataclysmic variable", 900, 150, 700, 2, []string{"Ha", "Hb", "Hg", "Hd", "HeI_4471", "HeII_4686"}, []string{"HeI_5876"}}, // among Na I
		{"pulsating red star", 1500, 300, 60, 4, []string{"Hd"}, nil},
		{"Wolf-Rayet star", 900, 150, 1200, 3, []string{"HeII_4686"}, nil},
	} {
		rng := rand.New(rand.NewPCG(37, 1))
		var s Scratch
		for range 20 {
			var lit []profileTruth
			for _, name := range append(tc.names, tc.also...) {
				lit = append(lit, rest(waveOf(t, m, name), tc.sigma, tc.peak))
			}
			a := forest(3700, 7200, tc.spacing, tc.depths, 0.05, rng, lit...)
			res := m.Measure(nil, []Arm{a}, Options{Expect: star}, &s)
			for i, name := range tc.names {
				r := find1(t, res, name)
				want := -lit[i].flux / a.Cont[0]
				if r.Kind != Emission {
					t.Errorf("%s: %s is %s %s, %.1f +- %.1f, want %.1f", tc.what, name, r.Kind, r.Reason, r.EWRest, r.EWRestErr, want)
				} else if math.Abs(r.EWRest-want) > 0.2*math.Abs(want)+4*r.EWRestErr {
					t.Errorf("%s: %s has %.1f +- %.1f, want %.1f", tc.what, name, r.EWRest, r.EWRestErr, want)
				}
			}
		}
	}
}

// Emission that its ion does not show where it must be stronger is none: a hump at H10, without a
// line from a lower level, and one at He I 4026 without 5876. With them it stays.
func TestCompanions(t *testing.T) {
	m := fullMeter(t)
	wave := grid(4200, 69, 4700)
	hump := func(name string, sigma, peak float64) profileTruth { return rest(waveOf(t, m, name), sigma, peak) }
	for _, tc := range []struct {
		name, kind, reason string
		lit                []profileTruth
	}{
		{"H10", Limit, ReasonNoCompanion, []profileTruth{hump("H10", 700, 0.4)}},
		{"H10", Emission, "", []profileTruth{hump("H10", 700, 0.4), hump("Hd", 700, 0.6), hump("Hg", 700, 0.7), hump("Hb", 700, 1), hump("Ha", 700, 2)}},
		{"Hd", Emission, "", []profileTruth{hump("Hd", 100, 2)}}, // a shock
		{"HeI_4026", Limit, ReasonNoCompanion, []profileTruth{hump("HeI_4026", 900, 0.3)}},
		{"HeI_4026", Emission, "", []profileTruth{hump("HeI_4026", 200, 0.5), hump("HeI_4471", 200, 1), hump("HeI_5876", 200, 2)}},
		{"OIII_4363", Limit, ReasonNoCompanion, []profileTruth{hump("OIII_4363", 300, 0.4)}},
		{"CaII_K", Emission, "", []profileTruth{hump("CaII_K", 100, 1)}},
		{"MgII_4481", Limit, ReasonWrongSign, []profileTruth{hump("MgII_4481", 150, 0.4)}},
		{"FeII_2600", Limit, ReasonWrongSign, []profileTruth{hump("FeII_2600", 150, 0.4)}},
	} {
		var a Arm
		noisy(&a, newArm(wave, 1, 0.03, tc.lit...), rand.New(rand.NewPCG(41, 1)))
		res := m.Measure(nil, []Arm{a}, Options{}, nil)
		if r := find1(t, res, tc.name); r.Kind != tc.kind || r.Reason != tc.reason {
			t.Errorf("%s in %v: %s %q, %.2f +- %.2f, want %s %q", tc.name, tc.lit, r.Kind, r.Reason, r.EWRest, r.EWRestErr, tc.kind, tc.reason)
		}
	}
}

// Where hydrogen of a cool star shines, He I may, and Ca II H takes its light from H-epsilon; where it
// does not, He I is not fitted, and where K does not shine, H is none.
func TestFlareStar(t *testing.T) {
	m := fullMeter(t)
	cool := func(l *linelist.Line) bool { return l.Seen != "emission" && l.Ion != "He I" && l.Ion != "He II" }
	balmer, calcium, both := []string{"Ha", "Hb", "Hg", "Hd", "H7"}, []string{"CaII_K", "CaII_H"}, []string{"HeI_4471", "HeI_5876"}
	for _, tc := range []struct {
		lit, seen   []string
		name, other string // the kind or reason of one that is not lit
	}{
		{slices.Concat(balmer, calcium, both), slices.Concat(balmer, calcium, both), "HeI_4026", Limit},
		{slices.Concat(balmer, both), slices.Concat(balmer, both), "CaII_H", Limit},
		{both, nil, "HeI_5876", Unmeasured},
		{balmer, balmer, "HeI_5876", Limit},
	} {
		var lit []profileTruth
		for _, name := range tc.lit {
			lit = append(lit, rest(waveOf(t, m, name), 60, 1))
		}
		var a Arm
		noisy(&a, newArm(grid(3800, 30, 19000), 1, 0.02, lit...), rand.New(rand.NewPCG(59, 1)))
		res := m.Measure(nil, []Arm{a}, Options{Expect: cool}, nil)
		for _, name := range tc.seen {
			want := rest(waveOf(t, m, name), 60, 1).flux
			if r := find1(t, res, name); r.Kind != Emission || math.Abs(r.EWRest+want) > 4*r.EWRestErr {
				t.Errorf("%v: %s is %s %s, %.2f +- %.2f, want %.2f", tc.lit, name, r.Kind, r.Reason, r.EWRest, r.EWRestErr, -want)
			}
		}
		if r := find1(t, res, tc.name); r.Kind != tc.other {
			t.Errorf("%v: %s is %s %s, %.2f +- %.2f, want %s", tc.lit, tc.name, r.Kind, r.Reason, r.EWRest, r.EWRestErr, tc.other)
		}
	}
}

// Pa13, Pa15 and Pa16 of a nebula are no Ca II, and [S III] 6312 makes no [O I] broad: they are fitted where they
// are seen, at any width that separates them, and unexpected where they are not, which leaves Ca II of stars alone.
func TestNebulaHasNoCalcium(t *testing.T) {
	m := fullMeter(t)
	hydrogen := map[string]float64{"Ha": 3, "Hb": 1, "Pa9": 0.09, "Pa10": 0.06, "Pa11": 0.045, "Pa12": 0.035, "Pa13": 0.027, "Pa14": 0.022, "Pa15": 0.018, "Pa16": 0.015}
	var nebula, stars []profileTruth
	for _, l := range m.lines { // in order, not that of the map
		if p := hydrogen[l.Name]; p > 0 {
			nebula = append(nebula, rest(l.Wave, 70, 20*p))
		}
	}
	nebula = append(nebula, rest(waveOf(t, m, "SIII_6312"), 70, 0.3), rest(waveOf(t, m, "OI_6300"), 70, 0.3), rest(waveOf(t, m, "OI_6364"), 70, 0.097), rest(waveOf(t, m, "HeI_6678"), 70, 0.6), rest(waveOf(t, m, "HeI_5876"), 70, 2), rest(waveOf(t, m, "SIII_9069"), 70, 3))
	for _, name := range []string{"CaII_8498", "CaII_8542", "CaII_8662"} {
		stars = append(stars, rest(waveOf(t, m, name), 150, -0.2))
	}
	for _, tc := range []struct {
		lit  []profileTruth
		want map[string]string // kinds
	}{
		{nebula, map[string]string{"Pa11": Emission, "Pa14": Emission, "HeI_6678": Emission, "SIII_6312": Emission, "OI_6300": Emission}},
		{append(stars, rest(waveOf(t, m, "Ha"), 150, 1)), map[string]string{"Pa13": Unmeasured, "SIII_6312": Unmeasured, "HeI_6678": Unmeasured, "CaII_8498": Absorption, "CaII_8542": Absorption, "CaII_8662": Absorption}},
	} {
		var a Arm
		noisy(&a, newArm(grid(6800, 30, 6400), 1, 0.02, tc.lit...), rand.New(rand.NewPCG(61, 1)))
		res := m.Measure(nil, []Arm{a}, Options{}, nil)
		for name, kind := range tc.want {
			if r := find1(t, res, name); r.Kind != kind {
				t.Errorf("%s is %s %s, want %s", name, r.Kind, r.Reason, kind)
			}
		}
		for _, r := range res {
			if strings.HasPrefix(r.Name, "CaII_8") && r.Kind == Emission {
				t.Errorf("%s in emission, %.2f +- %.2f", r.Name, r.EWRest, r.EWRestErr)
			}
			if r.Name == "OI_6300" && r.Kind == Emission && math.Abs(r.WidthKms-70) > 4*r.WidthErr {
				t.Errorf("[O I] is %.0f +- %.0f km/s wide, want 70", r.WidthKms, r.WidthErr)
			}
		}
	}
}

// Deep Na I D beside He I 5876 are known lines, and no unknown dips that He I could be the gap between.
func TestSodiumIsKnown(t *testing.T) {
	m := fullMeter(t)
	lit := []profileTruth{rest(waveOf(t, m, "HeI_5876"), 120, 0.12), rest(waveOf(t, m, "NaI_D2"), 120, -0.6), rest(waveOf(t, m, "NaI_D1"), 120, -0.5)}
	var a Arm
	noisy(&a, newArm(grid(5880, 50, 500), 1, 0.01, lit...), rand.New(rand.NewPCG(67, 1)))
	r := find1(t, m.Measure(nil, []Arm{a}, Options{}, nil), "HeI_5876")
	if r.Kind != Emission || math.Abs(r.EWRest+lit[0].flux) > 4*r.EWRestErr {
		t.Errorf("%s %s, %.2f +- %.2f, want %.2f", r.Kind, r.Reason, r.EWRest, r.EWRestErr, -lit[0].flux)
	}
}

// A companion in a band of the sky denies, too, though not what a firm line of the ion vouches for; and no narrow
// line of a galaxy is more than twice as wide as its gas.
func TestSkyAndWidthDeny(t *testing.T) {
	m := fullMeter(t)
	hump := func(name string, sigma, peak float64) profileTruth { return rest(waveOf(t, m, name), sigma, peak) }
	sky := []Band{{4468, 4478}, {5860, 5890}}
	for _, tc := range []struct {
		name, kind, reason string
		sky                []Band
		lit                []profileTruth
	}{
		{"HeI_4026", Limit, ReasonNoCompanion, sky, []profileTruth{hump("HeI_4026", 300, 0.12)}},
		{"HeI_4471", Limit, ReasonNoCompanion, sky[1:], []profileTruth{hump("HeI_4471", 300, 0.1)}},
		{"HeI_4471", Emission, "", sky[1:], []profileTruth{hump("HeI_4471", 300, 0.4)}}, // firm itself
		{"HeI_4471", Limit, ReasonNoCompanion, nil, []profileTruth{hump("HeI_4471", 300, 0.4)}},
		{"SII_4069", Emission, "", nil, []profileTruth{hump("OIII_5007", 150, 3), hump("OIII_4959", 150, 1), hump("SII_4069", 900, 0.2)}}, // what of it has the width of the gas
		{"SII_4069", Emission, "", nil, []profileTruth{hump("OIII_5007", 150, 3), hump("OIII_4959", 150, 1), hump("SII_4069", 250, 0.2)}},
		{"SII_4069", Emission, "", nil, []profileTruth{hump("SII_4069", 900, 0.2)}}, // nothing to compare
	} {
		var a Arm
		noisy(&a, newArm(grid(3900, 69, 4700), 1, 0.03, tc.lit...), rand.New(rand.NewPCG(53, 1)))
		res := m.Measure(nil, []Arm{a}, Options{Sky: tc.sky}, nil)
		if r := find1(t, res, tc.name); r.Kind != tc.kind || r.Reason != tc.reason {
			t.Errorf("%s in %v, sky %v: %s %q, %.2f +- %.2f, %.0f km/s, want %s %q", tc.name, tc.lit, tc.sky, r.Kind, r.Reason, r.EWRest, r.EWRestErr, r.WidthKms, tc.kind, tc.reason)
		}
		if len(tc.lit) == 3 && find1(t, res, tc.name).WidthKms > 1.2*300 {
			t.Errorf("%s in %v: %.0f km/s wide", tc.name, tc.lit, find1(t, res, tc.name).WidthKms)
		}
	}
}

// Hot stars absorb He II, what is no star does not: there it is a limit, that of all others.
func TestIonizedHeliumAbsorbs(t *testing.T) {
	m := fullMeter(t)
	for _, tc := range []struct {
		opt          Options
		kind, reason string
	}{
		{Options{Expect: func(*linelist.Line) bool { return true }}, Absorption, ""},
		{Options{Expect: func(*linelist.Line) bool { return true }, Stark: true}, Absorption, ""},
		{Options{}, Limit, ReasonWrongSign},
		{Options{Expect: func(l *linelist.Line) bool { return l.Ion != "He II" }}, Unmeasured, ReasonUnexpected},
	} {
		var a Arm
		truth := rest(waveOf(t, m, "HeII_4686"), 400, -0.3)
		noisy(&a, newArm(grid(4200, 69, 2000), 1, 0.02, truth), rand.New(rand.NewPCG(47, 1)))
		r := find1(t, m.Measure(nil, []Arm{a}, tc.opt, nil), "HeII_4686")
		if r.Kind != tc.kind || r.Reason != tc.reason {
			t.Errorf("Expect %t, Stark %t: %s %q, want %s %q", tc.opt.Expect != nil, tc.opt.Stark, r.Kind, r.Reason, tc.kind, tc.reason)
		}
		if r.Kind == Absorption && math.Abs(r.EWRest+truth.flux) > 4*r.EWRestErr {
			t.Errorf("%.3f +- %.3f, want %.3f", r.EWRest, r.EWRestErr, -truth.flux)
		}
		if r.Kind == Limit && math.Abs(r.UpperLimit-math.Abs(r.EWRest)-3*r.EWRestErr) > 1e-12*r.UpperLimit {
			t.Errorf("limit %.3f of %.3f +- %.3f, want |W| and three errors", r.UpperLimit, r.EWRest, r.EWRestErr)
		}
	}
}

// What lies beyond the range of a line's offset is something else: a limit at the place of the
// line, with the width of the spectrum's other line. Within the range it is the line.
func TestStrayed(t *testing.T) {
	m := parse(t, oneLine+"[[line]]\nname = \"B\"\nion = \"Y I\"\nwave = 5300.0\nseen = \"absorption\"\nsource = \"invented\"\n")
	for _, tc := range []struct {
		offset       float64 // km/s, of 300 allowed
		kind, reason string
	}{
		{0, Absorption, ""}, {200, Absorption, ""}, {450, Limit, ReasonAtBound}, {-500, Limit, ReasonAtBound},
	} {
		var a Arm
		noisy(&a, newArm(grid(5150, 30, 1600), 1, 0.02, rest(5000*(1+tc.offset/c), 150, -0.5), rest(5300, 100, -0.4)), rand.New(rand.NewPCG(43, 1)))
		if r := m.Measure(nil, []Arm{a}, Options{}, nil)[0]; r.Kind != tc.kind || r.Reason != tc.reason {
			t.Errorf("%g km/s off: %s %q at %.0f km/s, %.2f +- %.2f", tc.offset, r.Kind, r.Reason, r.OffsetKms, r.EWRest, r.EWRestErr)
		}
	}
}
