package lines

import (
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

func find1(t *testing.T, res []Result, name string) Result {
	t.Helper()
	for _, r := range res {
		if r.Name == name {
			return r
		}
	}
	t.Fatalf("no result for %s", name)
	return Result{}
}

// truthOf returns the rest equivalent width of a line of shape.
func truthOf(m *Meter, name string, shape func(*line) (float64, float64)) float64 {
	for i := range m.lines {
		if l := &m.lines[i]; l.Name == name {
			s, p := shape(l)
			return -p * math.Sqrt(2*math.Pi) * l.Wave * s / c
		}
	}
	return math.NaN()
}

// A galaxy with every line of the shipped list: what stands alone or can be
// resolved must come back within 4 errors, in list order, one row a line.
func TestGalaxy(t *testing.T) {
	m := fullMeter(t)
	a := surveySpectrum(m, 0.1, 0.02, galaxyShape)
	res := m.Measure(nil, []Arm{a}, Options{Z: 0.1, ZErr: 2e-5, Sky: []Band{{6860, 6960}}}, nil)
	last := 0.0
	for _, r := range res {
		if r.RestWave < last {
			t.Errorf("%s out of order", r.Name)
		}
		last = r.RestWave
		obs := r.RestWave * 1.1
		if obs < a.Wave[0] || obs > a.Wave[len(a.Wave)-1] {
			t.Errorf("%s is outside the coverage", r.Name)
		}
	}
	for _, name := range strings.Fields("NeV_3426 OII_3726 OII_3729 NeIII_3869 CaII_K Hg OIII_4363 HeII_4686 Hb OIII_4959 OIII_5007 MgI_5183 NII_5755 OI_6300 Ha NII_6548 NII_6583 SII_6716 SII_6731 ArIII_7136") {
		r := find1(t, res, name)
		want := truthOf(m, name, galaxyShape)
		near(t, name, r.EWRest, want, 4*r.EWRestErr)
		near(t, name+" sum", r.EWSum, want, 4*r.EWSumErr)
		if (want > 0) != (r.Kind == Absorption) || (want < 0) != (r.Kind == Emission) {
			t.Errorf("%s: kind %s for an equivalent width of %.2f", name, r.Kind, want)
		}
		// Stellar absorption of unknown width may hide in a faint Balmer line.
		if !(r.SNR > 5) && name != "Hg" {
			t.Errorf("%s: S/N %.1f", name, r.SNR)
		}
	}
	// [O III] leaves one upper level: the fluxes have the ratio of physics.
	strong, weak := find1(t, res, "OIII_5007"), find1(t, res, "OIII_4959")
	near(t, "[O III] ratio", strong.Flux/weak.Flux, 2.98, 1e-9) // Storey & Zeippen 2000, from memory
	strong, weak = find1(t, res, "NII_6583"), find1(t, res, "NII_6548")
	near(t, "[N II] ratio", strong.Flux/weak.Flux, 3.05, 1e-9) // Storey & Zeippen 2000, from memory
	strong, weak = find1(t, res, "OI_6300"), find1(t, res, "OI_6364")
	near(t, "[O I] ratio", strong.Flux/weak.Flux, 3.1, 1e-9) // Galavis, Mendoza & Zeippen 1997, from memory
	// He I 3889 lies 31 km/s from H8: one of them carries the sum.
	he := find1(t, res, "HeI_3889")
	if he.Kind != Unmeasured || he.Reason != ReasonBlended || he.Blend != "HeI_3889+H8" {
		t.Errorf("HeI_3889: %s %s %s", he.Kind, he.Reason, he.Blend)
	}
	if b := find1(t, res, "H8").Blend; b != "HeI_3889+H8" {
		t.Errorf("H8: blend %q", b)
	}
	if b := find1(t, res, "Ha").Blend; !strings.Contains(b, "NII_6548") {
		t.Errorf("Ha: blend %q", b)
	}
	// 6302.05 at z = 0.1 is 6932 Angstrom, in the B band; [O III], at 5509, in none.
	if !find1(t, res, "OI_6300").OnSky || find1(t, res, "OIII_5007").OnSky {
		t.Error("sky bands are not told")
	}
}

// A quasar: broad permitted lines with their own widths, narrow [O III] on top.
func TestQuasar(t *testing.T) {
	m := fullMeter(t)
	for z, names := range map[float64]string{2.2: "CIV_1548 CIV_1550 MgII_2796 MgII_2803", 0.3: "Ha Hb OIII_5007"} {
		a := surveySpectrum(m, z, 0.03, quasarShape)
		res := m.Measure(nil, []Arm{a}, Options{Z: z, Broad: true}, nil)
		for _, name := range strings.Fields(names) {
			r := find1(t, res, name)
			near(t, name, r.EWRest, truthOf(m, name, quasarShape), 4*r.EWRestErr)
			want := 2500.0
			if name == "OIII_5007" {
				want = 250
			}
			near(t, name+" width", r.WidthKms, want, max(4*r.WidthErr, 0.02*want))
		}
	}
	// Members of a doublet that the width does not resolve share one
	// amplitude, and their errors say so; the set is as significant as the doubt of the continuum
	// lets it be: 206 over 4 % of 2 sqrt(pi) sigma, 41 Angstrom, is 35.
	a := surveySpectrum(m, 2.2, 0.03, quasarShape)
	r := find1(t, m.Measure(nil, []Arm{a}, Options{Z: 2.2, Broad: true}, nil), "CIV_1548")
	if !(r.EWRestErr > 0.1*math.Abs(r.EWRest)) || !(r.SNR > 30 && r.SNR < 36) {
		t.Errorf("CIV_1548: W = %.2f +- %.2f, S/N %.0f", r.EWRest, r.EWRestErr, r.SNR)
	}
}

// The reasons for not measuring.
func TestReasons(t *testing.T) {
	m := parse(t, oneLine)
	clean := func() Arm { return newArm(grid(5000, 60, 201), 1, 0.02, profileTruth{5000, 2, 5}) }
	a := clean()
	for i := 97; i < 104; i++ {
		a.Ivar[i] = 0
	}
	nocont := clean()
	for i := range nocont.Cont {
		nocont.Cont[i] = math.NaN()
	}
	zero := clean()
	for i := range zero.Cont {
		zero.Cont[i] = 0
		zero.Flux[i]--
	}
	edge := clean()
	n := 102
	edge.Wave, edge.Flux, edge.Ivar, edge.Cont = edge.Wave[:n], edge.Flux[:n], edge.Ivar[:n], edge.Cont[:n]
	for _, tc := range []struct {
		name         string
		arm          Arm
		kind, reason string
	}{
		{"masked", a, Unmeasured, ReasonMasked},
		{"no continuum", nocont, Unmeasured, ReasonNoContinuum},
		{"zero continuum", zero, Emission, ReasonNoContinuum},
		{"edge", edge, Unmeasured, ReasonOffEdge},
	} {
		res := m.Measure(nil, []Arm{tc.arm}, Options{}, nil)
		if len(res) != 1 || res[0].Kind != tc.kind || res[0].Reason != tc.reason {
			t.Errorf("%s: %+v", tc.name, res)
			continue
		}
		if !math.IsNaN(res[0].EWRest) {
			t.Errorf("%s: equivalent width %v", tc.name, res[0].EWRest)
		}
	}
	// A flux without a continuum stands.
	r := m.Measure(nil, []Arm{zero}, Options{}, nil)[0]
	near(t, "flux without continuum", r.Flux, 5, 3*r.FluxErr)
	if res := m.Measure(nil, []Arm{clean()}, Options{Z: 1}, nil); len(res) != 0 {
		t.Errorf("a line outside the coverage has a row: %+v", res)
	}
	if res := m.Measure(nil, nil, Options{}, nil); len(res) != 0 {
		t.Errorf("no arms: %+v", res)
	}
}

// Masked pixels are filled: the sum stays right when a few are missing, and its
// error grows.
func TestMaskedPixels(t *testing.T) {
	m := parse(t, oneLine)
	a := newArm(grid(5000, 25, 401), 1, 0.01, profileTruth{5000, 2, -2.5})
	whole := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
	a.Ivar[196], a.Ivar[204], a.Flux[204] = 0, 0, math.NaN()
	r := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
	near(t, "fit", r.EWRest, 2.5, 0.02*r.EWRestErr)
	near(t, "sum", r.EWSum, 2.5, 0.05*r.EWSumErr)
	if !(r.EWSumErr > whole.EWSumErr) || r.Pixels != whole.Pixels-2 {
		t.Errorf("errors %v %v, pixels %d %d", r.EWSumErr, whole.EWSumErr, r.Pixels, whole.Pixels)
	}
}

// Noise alone: lines are seen no more often than the thresholds promise, and
// the limit lies above the truth, |W| = 0 or of a faint line, as often as
// stated.
func TestLimits(t *testing.T) {
	m := parse(t, oneLine)
	var sc Scratch
	for _, w := range []float64{0, 0.3} {
		sigma := 100.0 * 5000 / c
		clean := newArm(grid(5000, 50, 301), 1, 0.15, profileTruth{5000, sigma, -w})
		rng := rand.New(rand.NewPCG(3, uint64(10*w)))
		const n = 20000
		var a Arm
		var pull moments
		seen, broken := 0, 0
		for range n {
			noisy(&a, clean, rng)
			r := m.Measure(nil, []Arm{a}, Options{}, &sc)[0]
			if r.Kind != Limit {
				seen++
				continue
			}
			pull.add((r.EWRest - w) / r.EWRestErr)
			if r.UpperLimit < w {
				broken++
			}
		}
		t.Logf("W = %g: seen %d, limit broken %d of %d, pulls %.3f +- %.3f", w, seen, broken, n, pull.mean(), pull.sd())
		// Measured 0.36 %: 0.27 % lie beyond 3 sigma either way, the rest are
		// boxes beyond 4.
		if w == 0 && float64(seen) > 0.008*n {
			t.Errorf("%d of %d lines seen in pure noise", seen, n)
		}
		if float64(broken) > 0.003*n {
			t.Errorf("limit below the truth in %d of %d", broken, n)
		}
		// Selected to be below 3 sigma, hence a little under 1.
		if sd := pull.sd(); !(sd > 0.9 && sd < 1.05) {
			t.Errorf("pulls of limits have a standard deviation of %.3f", sd)
		}
	}
}

// An absorption line with an emission core must not break anything: the sum
// still adds up both.
func TestFilledAbsorption(t *testing.T) {
	m := parse(t, oneLine)
	a := newArm(grid(5000, 25, 801), 1, 0.01, profileTruth{5000, 10, -12}, profileTruth{5000, 1.5, 4})
	r := m.Measure(nil, []Arm{a}, Options{}, nil)[0]
	if r.Kind == Unmeasured || math.IsNaN(r.EWRest) || math.IsNaN(r.EWSum) {
		t.Errorf("%+v", r)
	}
	// The misfit shows in the error.
	plain := newArm(grid(5000, 25, 801), 1, 0.01, profileTruth{5000, 10, -12})
	if p := m.Measure(nil, []Arm{plain}, Options{}, nil)[0]; r.Kind == Absorption && !(r.EWRestErr > p.EWRestErr) {
		t.Errorf("error %v with a core, %v without", r.EWRestErr, p.EWRestErr)
	}
}

// Same input, same result, whatever the scratch has seen before; and nothing
// is allocated once it has.
func TestScratch(t *testing.T) {
	m := fullMeter(t)
	galaxy := []Arm{surveySpectrum(m, 0.1, 0.05, galaxyShape)}
	quasar := []Arm{surveySpectrum(m, 2.2, 0.05, quasarShape)}
	fresh := m.Measure(nil, galaxy, Options{Z: 0.1}, nil)
	var sc Scratch
	other := parse(t, oneLine)
	other.Measure(nil, galaxy, Options{Z: 0.1}, &sc)
	m.Measure(nil, quasar, Options{Z: 2.2, Broad: true}, &sc)
	used := m.Measure(nil, galaxy, Options{Z: 0.1}, &sc)
	if len(fresh) != len(used) {
		t.Fatal("numbers of results differ")
	}
	for i := range fresh {
		if !same(fresh[i], used[i]) {
			t.Errorf("a used scratch changes %+v to %+v", fresh[i], used[i])
		}
	}
	if n := testing.AllocsPerRun(20, func() { used = m.Measure(used[:0], galaxy, Options{Z: 0.1}, &sc) }); n != 0 {
		t.Errorf("%v allocations a spectrum", n)
	}
}

// same compares results bit by bit, with NaN equal to NaN.
func same(a, b Result) bool {
	x, y := reflect.ValueOf(a), reflect.ValueOf(b)
	for i := range x.NumField() {
		switch x.Field(i).Kind() {
		case reflect.Array:
			for k := range x.Field(i).Len() {
				if math.Float64bits(x.Field(i).Index(k).Float()) != math.Float64bits(y.Field(i).Index(k).Float()) {
					return false
				}
			}
		case reflect.Float64:
			if math.Float64bits(x.Field(i).Float()) != math.Float64bits(y.Field(i).Float()) {
				return false
			}
		default:
			if !x.Field(i).Equal(y.Field(i)) {
				return false
			}
		}
	}
	return true
}
