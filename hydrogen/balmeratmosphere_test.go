package hydrogen

import (
	"fmt"
	"math"
	"testing"
)

func atmosphere(t testing.TB, ne, tempK, strength float64, last int) *BalmerAtmosphere {
	t.Helper()
	a, err := NewBalmerAtmosphere(ne, tempK, strength, last)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func TestContinuumStrength(t *testing.T) {
	// sigma = pi r_e c f_0/nu_R with f_0 per Rydberg.
	section := func(lower int) float64 {
		return math.Pi * ElectronRadius * continuumStrength(lower) / RydbergHydrogen * 1e4
	}
	// From the ground state: the exact cross section (Stobbe 1930). What the
	// extrapolation leaves goes as n^-4, 1e-5 at 20. That of a nucleus of
	// finite mass is as the square of its Bohr radius.
	mass := math.Pow(1+1/ProtonElectronRatio, 2)
	within(t, "Lyman limit", section(1)/(mass*LymanLimitCrossSection(LymanLimit)), 1, 2e-5)
	// From n = 2: Kramers' 7.907e-18 cm^2 n with the Gaunt factor 0.876 of Menzel &
	// Pekeris 1935 (three digits, from memory).
	within(t, "Balmer limit", section(2)/(mass*7.907e-18*2*0.876), 1, 6e-4)
}

func TestHoltsmarkBelow(t *testing.T) {
	// The integral of the distribution's own integral over beta is
	// (2/pi) int exp(-x^(3/2)) (sin beta x - beta x cos beta x)/x dx; x = v^2.
	want := func(beta float64) float64 {
		const step, last = 0.0005, 7000
		sum := 0.0
		for j := range last {
			v := (float64(j) + 0.5) * step
			s, c := math.Sincos(beta * v * v)
			sum += 2 / math.Pi * math.Exp(-v*v*v) * (s - beta*v*v*c) * 2 / v * step
		}
		return sum
	}
	for _, beta := range []float64{0.05, 0.5, 1, 1.61, 2.34, 5, 12, 19.99, 20.01, 40} {
		// W itself is good to 1e-4.
		within(t, fmt.Sprintf("P(%g)", beta), holtsmarkBelow(beta), want(beta), 1e-4)
	}
	if holtsmarkBelow(0) != 0 || holtsmarkBelow(math.Inf(1)) != 1 || !math.IsNaN(holtsmarkBelow(math.NaN())) {
		t.Error("no field, any field, NaN")
	}
}

// The levels dissolve where the lines run together (Inglis & Teller 1939), and
// every line ends half-way to the next one.
func TestBalmerGasDissolves(t *testing.T) {
	for _, ne := range []float64{1e12, 1e14, 1e16, 1e18} {
		var layers [gasLayers]float64
		for k := range layers {
			layers[k] = ne
		}
		g, err := newBalmerGas(&layers, 1e4, maxStark)
		if err != nil {
			t.Fatal(err)
		}
		merging := MergingLevel(ne)
		for _, q := range []struct{ factor, least, most float64 }{{0.7, 0.7, 1}, {1, 0.1, 0.7}, {1.5, 0, 0.1}} {
			if w := g.intact(0, q.factor*merging); !(w >= q.least && w <= q.most) {
				t.Errorf("%g cm^-3: level %.1f, %g of the merging one, is there in %.3f of atoms, want %g to %g", ne, q.factor*merging, q.factor, w, q.least, q.most)
			}
		}
		if ne != 1e16 {
			continue
		}
		for i, line := range g.lines[:maxStark-3] {
			half := 0.5 * (line.wave - g.lines[i+1].wave)
			// Patterns meet at equal distances in frequency, and a node is 6 % wide.
			if r := line.reach / half; !(r > 0.8 && r < 1.35) {
				t.Errorf("2-%d ends at %.1f Angstrom, half the way to the next is %.1f", i+3, line.reach, half)
			}
		}
	}
}

// Where the line is thin its wing is that of the profile, and goes as
// distance^(-5/2).
func TestBalmerWing(t *testing.T) {
	a := atmosphere(t, 1e14, 1e4, 0.01, 4)
	line, err := NewTransition(2, 4)
	if err != nil {
		t.Fatal(err)
	}
	wing := func(d float64) float64 { return a.Lines(line.Wave+d) + a.Lines(line.Wave-d) }
	// Redward of 36 Angstrom the innermost component has ended.
	for _, d := range []float64{8, 12, 18} {
		// The next term of the distribution is 5 beta^-1.5 of the first.
		within(t, fmt.Sprintf("slope of the wing from %g Angstrom", d), math.Log2(wing(d)/wing(2*d)), 2.5, 0.04)
	}
	// Depth of a thin line by hand: dlnB/dT dT/dtau times the absorption at the
	// mean density above tau = 2/3, all wings going as the density.
	p, err := NewStarkProfile(4, 0.5e14, 1e4)
	if err != nil {
		t.Fatal(err)
	}
	const d = 20.0
	eta := 0.01 * math.Pow(BalmerLimit/line.Wave, 2) * p.At(d) * line.F * line.Wave * line.Wave / (strengthAtLimit() * balmerRydberg)
	q := math.Pow(line.Wave/meanWave, 2)
	temp := func(tau float64) float64 { return 1e4 * math.Pow(0.75*(tau/q+2.0/3), 0.25) }
	planck := func(tau float64) float64 { return 1 / math.Expm1(1.438776877e8/(line.Wave*temp(tau))) }
	slope := math.Log(planck(2./3+1e-4)/planck(2./3-1e-4)) / 2e-4
	within(t, "depth of the thin wing over its slope", 0.5*wing(d)/(slope*2./3*eta), 1, 0.02)
}

// A core that takes all light shows the surface, T^4 = T_eff^4/2.
func TestBalmerCore(t *testing.T) {
	const tempK = 9500.0
	a := atmosphere(t, 3e15, tempK, 1000, 8)
	for upper := 3; upper <= 6; upper++ {
		line, err := NewTransition(2, upper)
		if err != nil {
			t.Fatal(err)
		}
		q := math.Pow(line.Wave/meanWave, 2)
		x := 1.438776877e8 / (line.Wave * tempK)
		want := 1 - math.Expm1(x*math.Pow(0.5*(1+1/q), -0.25))/math.Expm1(x*math.Pow(0.5, -0.25))
		// From a hundredth of the optical depth, T is 0.4 % above.
		within(t, fmt.Sprintf("core of 2-%d", upper), a.Lines(line.Wave)/want, 1, 0.03)
	}
	// Blueward of the limit the Balmer continuum does the same.
	x, q := 1.438776877e8/(3500*tempK), math.Pow(3500/meanWave, 2)
	want := 1 - math.Expm1(x*math.Pow(0.5*(1+1/q), -0.25))/math.Expm1(x*math.Pow(0.5, -0.25))
	within(t, "jump at 3500 Angstrom", a.Jump(3500)/want, 1, 0.01)
	if j := a.Jump(5000); !(j >= 0 && j < 0.05) {
		t.Errorf("the jump takes %g at 5000 Angstrom", j)
	}
}

// Few layers are enough: the same with 56 layers.
func TestBalmerLayers(t *testing.T) {
	for _, star := range []struct{ ne, tempK, strength float64 }{{3e14, 15000, 1}, {3e15, 9500, 2}, {1e17, 15000, 1}} {
		a := atmosphere(t, star.ne, star.tempK, star.strength, 10)
		const parts = 8
		var gases [parts]*balmerGas
		const layers = parts * gasLayers
		bottom := func(k int) float64 {
			if k < 0 {
				return 0
			}
			return lightAt * math.Pow(2, float64(k+1-layers)/parts)
		}
		for p := range gases {
			var ne [gasLayers]float64
			for k := range ne {
				ne[k] = star.ne * 0.5 * (bottom(p*gasLayers+k-1) + bottom(p*gasLayers+k)) / lightAt
			}
			var err error
			if gases[p], err = newBalmerGas(&ne, star.tempK, 10); err != nil {
				t.Fatal(err)
			}
		}
		worst := 0.0
		for wave := 3800.0; wave < 6800; wave += 1.7 {
			sum, from := 0.0, lightAt
			scale := star.strength * math.Pow(BalmerLimit/wave, 2)
			for k := range layers {
				eta := scale * gases[k/gasLayers].linesAt(wave)[k%gasLayers]
				d := (1 + eta) * (bottom(k) - bottom(k-1))
				if sum+d > lightAt {
					from = bottom(k-1) + (lightAt-sum)/(1+eta)
					break
				}
				sum += d
			}
			want := 1 - a.brightness(wave, from)/a.brightness(wave, lightAt)
			worst = math.Max(worst, math.Abs(a.Lines(wave)-want))
		}
		t.Logf("%g cm^-3, %g K: %.4f of the continuum at worst", star.ne, star.tempK, worst)
		// The template error of the search is 0.02.
		if worst > 0.02 {
			t.Errorf("%g cm^-3, %g K: %d layers are %.4f of the continuum off", star.ne, star.tempK, gasLayers, worst)
		}
	}
}

func TestNewBalmerAtmosphereRefuses(t *testing.T) {
	for _, q := range []struct {
		ne, tempK, strength float64
		last                int
	}{{0, 1e4, 1, 10}, {math.NaN(), 1e4, 1, 10}, {1e20, 1e4, 1, 10}, {1e15, 0, 1, 10}, {1e15, math.Inf(1), 1, 10},
		{1e15, 1e4, 0, 10}, {1e15, 1e4, math.NaN(), 10}, {1e15, 1e4, 1, 2}, {1e15, 1e4, 1, maxStark + 1}} {
		if _, err := NewBalmerAtmosphere(q.ne, q.tempK, q.strength, q.last); err == nil {
			t.Errorf("NewBalmerAtmosphere%v: want an error", q)
		}
	}
	a := atmosphere(t, 1e15, 1e4, 1, 5)
	for _, wave := range []float64{math.NaN(), 0, -1} {
		if !math.IsNaN(a.Lines(wave)) || !math.IsNaN(a.Jump(wave)) {
			t.Errorf("at %g Angstrom: want NaN", wave)
		}
	}
}

func BenchmarkBalmerAtmosphere(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		a := atmosphere(b, 3e15, 9500, 2, maxStark)
		for wave := 3500.0; wave < 7600; wave++ {
			sink = a.Lines(wave)
		}
	}
}
