package hydrogen

import (
	"fmt"
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

// The constants are tied by exact relations; a digit mistyped in one breaks
// them. Tolerances: the larger relative uncertainty of the two sides (CODATA
// 2022), doubled.
func TestConstantsAgreeWithEachOther(t *testing.T) {
	within(t, "alpha^2 m_e c/(2 h R_inf)", FineStructure*FineStructure*ElectronMass*SpeedOfLight/(2*Planck*RydbergInfinity), 1, 1e-9)
	within(t, "alpha/(4 pi R_inf a_0)", FineStructure/(4*math.Pi*RydbergInfinity*BohrRadius), 1, 6e-10)
	within(t, "alpha^2 a_0/r_e", FineStructure*FineStructure*BohrRadius/ElectronRadius, 1, 1e-9)
	// k in eV/K, CODATA (exact, ten digits; from memory).
	within(t, "k/e", Boltzmann/ElementaryCharge, 8.617333262e-5, 1e-14)
	// CODATA 2022 m_e/m_p and R_inf/(1 + m_e/m_p) computed from it.
	within(t, "m_e/m_p", 1/ProtonElectronRatio, 5.446170214889e-4, 1e-15)
	within(t, "R_H", RydbergHydrogen, 10967758.340277, 2e-5)
}

func TestWavelengths(t *testing.T) {
	// 1e-4 A asked for; the table prints 1e-5.
	const tol = 1.5e-5
	c := readTable(t, "hydrogen_wavelengths.csv", 24)
	for i := range c.Len() {
		x, err := NewTransition(int(c.Number(i, "n_lo")), int(c.Number(i, "n_up")))
		if err != nil {
			t.Fatal(err)
		}
		within(t, c.Text(i, "line")+" centroid", x.Wave, c.Number(i, "vac_gf_centroid_A"), tol)
		within(t, c.Text(i, "line")+" strongest", x.WaveStrongest, c.Number(i, "vac_strongest_component_A"), tol)
	}
}

func TestLevels(t *testing.T) {
	level := func(n, l, twoJ int) float64 {
		e, err := Level(n, l, twoJ)
		if err != nil {
			t.Fatal(err)
		}
		return e
	}
	ground := level(1, 0, 1)
	// Ionization energy: NIST Handbook of Basic Atomic Spectroscopic Data, printed to 1e-4.
	within(t, "ionization, cm^-1", -ground, 109678.7717, 1e-4)
	// NIST level list (energies above the ground state), stored copy; its own
	// hyperfine convention leaves 1e-4.
	within(t, "4p1/2, cm^-1", level(4, 1, 1)-ground, 102823.8486046, 1e-4)
	within(t, "4s1/2, cm^-1", level(4, 0, 1)-ground, 102823.8530433, 1e-4)
	within(t, "5d3/2, cm^-1", level(5, 2, 3)-ground, 105291.652066, 1e-4)

	const mhz = SpeedOfLight * 1e-4 // per cm^-1
	// From memory: measured Lamb shift 1057.845 MHz, 2p fine structure
	// 10969.04 MHz, 1S-2S 2466061413.187 MHz. Small terms left out of the model
	// are worth 0.1 MHz at n = 2 and 0.5 MHz at n = 1.
	within(t, "2s1/2-2p1/2, MHz", (level(2, 0, 1)-level(2, 1, 1))*mhz, 1057.845, 0.1)
	within(t, "2p3/2-2p1/2, MHz", (level(2, 1, 3)-level(2, 1, 1))*mhz, 10969.04, 0.1)
	within(t, "1s-2s, MHz", (level(2, 0, 1)-ground)*mhz, 2466061413.187, 1)
	if got := -1e8 / ground; math.Abs(got-LymanLimit) > 1e-6 {
		t.Errorf("1e8/|E(1s)| = %.7f, LymanLimit = %.7f", got, LymanLimit)
	}
}

// Facts of the trade; common practice, no source. Tolerances: half a unit of
// the last digit people quote.
func TestEnergiesPeopleKnow(t *testing.T) {
	ev := func(perCm float64) float64 { return perCm * 100 * Planck * SpeedOfLight / ElementaryCharge }
	energy := func(n int) float64 {
		e, err := Level(n, n-1, 2*n-1)
		if err != nil {
			t.Fatal(err)
		}
		return ev(e)
	}
	within(t, "ground state, eV", energy(1), -13.6, 0.05)
	within(t, "1 -> 3, eV", energy(3)-energy(1), 12.09, 0.005)
	within(t, "3 -> 2, eV", energy(3)-energy(2), 1.89, 0.005)
	// lambda = h c/E with h c = 12398.41984 eV A (exact SI constants).
	x, err := NewTransition(1, 3)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "h c / E(1 -> 3), A", 12398.41984/(energy(3)-energy(1)), x.Wave, 0.01)
}

func TestOscillatorStrengths(t *testing.T) {
	c := readTable(t, "hydrogen_f.csv", 77)
	for i := range c.Len() {
		n, m := int(c.Number(i, "n_lo")), int(c.Number(i, "n_up"))
		x, err := NewTransition(n, m)
		if err != nil {
			t.Fatal(err)
		}
		// The table prints 13 digits.
		if d := relative(x.FInfinite, c.Number(i, "f_inf_mass")); !(d < 2e-12) {
			t.Errorf("f(%d,%d) = %.13g, off by %.1e", n, m, x.FInfinite, d)
		}
		if d := relative(x.F, c.Number(i, "f_H_reduced_mass(x(1+me/mp))")); !(d < 2e-12) {
			t.Errorf("f_H(%d,%d) = %.13g, off by %.1e", n, m, x.F, d)
		}
		// Nine digits printed; constants of CODATA 2018 there, 2022 here.
		if d := relative(x.A, c.Number(i, "A_ul_H_s-1")); !(d < 1e-8) {
			t.Errorf("A(%d,%d) = %.9g, off by %.1e", m, n, x.A, d)
		}
	}
	// Seen in a NIST ASD listing (Wiese & Fuhr 2009), five digits: A(14-6).
	x, err := NewTransition(6, 14)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "A(14-6)", x.A, 5.5265e3, 0.3)
}

func TestOscillatorStrengthsOfSublevels(t *testing.T) {
	c := readTable(t, "hydrogen_f_nl.csv", 153)
	for i := range c.Len() {
		n, l, m, k := int(c.Number(i, "n_lo")), int(c.Number(i, "l_lo")), int(c.Number(i, "n_up")), int(c.Number(i, "l_up"))
		f, err := OscillatorStrength(n, l, m, k)
		if err != nil {
			t.Fatal(err)
		}
		if d := relative(f, c.Number(i, "f_inf_mass")); !(d < 2e-12) { // 13 digits printed
			t.Errorf("f(%d,%d-%d,%d) = %.13g, off by %.1e", n, l, m, k, f, d)
		}
	}
}

// exactStrength is the formula of Menzel & Pekeris (1935) in rational numbers:
// f = (32/3) [(m-n)/(m+n)]^(2(n+m)) n^2 m^4 / [(m^2-n^2)^3 (m-n)] |F(1-m,-n;1;x)^2 - F(1-n,-m;1;x)^2|,
// x = -4nm/(m-n)^2.
func exactStrength(n, m int64) float64 {
	hyper := func(a, b int64, x *big.Rat) *big.Rat { // terminating 2F1(a, b; 1; x)
		term, sum := big.NewRat(1, 1), big.NewRat(1, 1)
		for k := int64(0); a+k < 0 && b+k < 0; k++ {
			term.Mul(term, big.NewRat((a+k)*(b+k), (k+1)*(k+1)))
			term.Mul(term, x)
			sum.Add(sum, term)
		}
		return sum.Mul(sum, sum)
	}
	x := big.NewRat(-4*n*m, (m-n)*(m-n))
	f := hyper(1-m, -n, x)
	f.Sub(f, hyper(1-n, -m, x))
	f.Abs(f)
	for range 2 * (n + m) {
		f.Mul(f, big.NewRat(m-n, m+n))
	}
	f.Mul(f, big.NewRat(32*n*n, 3))
	f.Mul(f, new(big.Rat).SetInt64(m*m*m*m))
	d := m*m - n*n
	f.Quo(f, new(big.Rat).SetInt64(d*d*d))
	f.Quo(f, new(big.Rat).SetInt64(m-n))
	v, _ := f.Float64()
	return v
}

func TestAllOscillatorStrengthsAgainstClosedForm(t *testing.T) {
	worst := 0.0
	for n := 1; n < MaxLevel; n++ {
		for m := n + 1; m <= MaxLevel; m += 1 + m/12 {
			x, err := NewTransition(n, m)
			if err != nil {
				t.Fatal(err)
			}
			worst = math.Max(worst, relative(x.FInfinite, exactStrength(int64(n), int64(m))))
		}
	}
	t.Logf("largest relative deviation %.1e", worst)
	if !(worst < 1e-11) { // 60 steps of a ladder and logarithms of 1e80
		t.Errorf("largest relative deviation %.1e, want below 1e-11", worst)
	}
}

func TestDampingConstants(t *testing.T) {
	c := readTable(t, "hydrogen_gamma.csv", 11)
	for i := range c.Len() {
		n := int(c.Number(i, "n"))
		for l, column := range []string{"gamma_ns", "gamma_np", "gamma_nd"} {
			if l >= n {
				continue
			}
			got, err := DecayRate(n, l)
			if err != nil {
				t.Fatal(err)
			}
			if d := relative(got, c.Number(i, column)); !(d < 1e-6) { // seven digits printed
				t.Errorf("decay rate of n=%d l=%d: %.7g, off by %.1e", n, l, got, d)
			}
		}
		lyman, err := NewTransition(1, n)
		if err != nil {
			t.Fatal(err)
		}
		if d := relative(lyman.Gamma, c.Number(i, "gamma_np")); !(d < 1e-6) {
			t.Errorf("Lyman 1-%d: gamma %.7g, off by %.1e", n, lyman.Gamma, d)
		}
	}
	// H alpha by hand from the same table and exact f: sublevels 2s-3p, 2p-3s, 2p-3d.
	f := []float64{0.43486544, 0.0135895450, 0.69578470} // Bethe & Salpeter 1957, table 13 (from memory), closed forms
	g := []float64{2, 6, 6}
	gamma := []float64{1.89701e8, 6.264903e8 + 6.313579e6, 6.264903e8 + 6.465105e7}
	var top, bottom float64
	for i := range f {
		top += f[i] * g[i] * gamma[i]
		bottom += f[i] * g[i]
	}
	x, err := NewTransition(2, 3)
	if err != nil {
		t.Fatal(err)
	}
	if d := relative(x.Gamma, top/bottom); !(d < 2e-6) { // eight digits in f, seven in the rates
		t.Errorf("H alpha gamma = %.7g, want %.7g", x.Gamma, top/bottom)
	}
}

// Thomas-Reiche-Kuhn: the strengths from the ground state add to one, bound
// lines, their tail beyond MaxLevel and the continuum together.
func TestStrengthsAddToOne(t *testing.T) {
	bound := 0.0
	var last Transition
	for m := 2; m <= MaxLevel; m++ {
		x, err := NewTransition(1, m)
		if err != nil {
			t.Fatal(err)
		}
		bound += x.FInfinite
		last = x
	}
	// f falls as m^-3: the rest is the integral from MaxLevel + 1/2.
	bound += last.FInfinite * math.Pow(MaxLevel, 3) / 2 / math.Pow(MaxLevel+0.5, 2)
	// Continuum: f = integral of sigma over nu / (pi r_e c), infinite mass. With
	// w = lambda/lambda_limit, d nu = nu_0 dw/w^2; midpoints, error 1e-7.
	nu0 := SpeedOfLight * RydbergInfinity
	continuum := 0.0
	const steps = 4000
	for i := range steps {
		w := (float64(i) + 0.5) / steps
		continuum += LymanLimitCrossSection(w*LymanLimit) * 1e-4 / (w * w) / steps
	}
	continuum *= nu0 / (math.Pi * ElectronRadius * SpeedOfLight)
	within(t, "bound strengths", bound, 0.5650, 5e-5) // Bethe & Salpeter 1957, section 61, from memory
	within(t, "sum of strengths", bound+continuum, 1, 2e-6)
}

// Summed over final l, the sublevels of one line give its mean strength.
func TestSublevelsAddUp(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, MaxLevel-1).Draw(t, "n")
		m := rapid.IntRange(n+1, MaxLevel).Draw(t, "m")
		sum := 0.0
		for l := 0; l < n; l++ {
			for _, k := range []int{l - 1, l + 1} {
				if k < 0 {
					continue
				}
				f, err := OscillatorStrength(n, l, m, k)
				if err != nil {
					t.Fatal(err)
				}
				if !(f > 0) {
					t.Fatalf("f(%d,%d-%d,%d) = %g", n, l, m, k, f)
				}
				sum += float64(2*l+1) * f
			}
		}
		x, err := NewTransition(n, m)
		if err != nil {
			t.Fatal(err)
		}
		if d := relative(sum/float64(n*n), x.FInfinite); d > 1e-13 {
			t.Fatalf("sum over l differs from the mean by %.1e", d)
		}
		// The strongest component lies within the fine structure: Rydberg value to 1e-4.
		rydberg := 1e10 / RydbergHydrogen / (1/float64(n*n) - 1/float64(m*m))
		if relative(x.Wave, rydberg) > 2e-5 || relative(x.WaveStrongest, rydberg) > 2e-5 {
			t.Fatalf("line %d-%d at %.4f and %.4f, Rydberg %.4f", n, m, x.Wave, x.WaveStrongest, rydberg)
		}
		if !(x.A > 0) || !(x.Gamma >= x.A) {
			t.Fatalf("line %d-%d: A = %g, gamma = %g", n, m, x.A, x.Gamma)
		}
	})
}

// Components of a multiplet share its strength: from each lower level in
// proportion to its statistical weight, and likewise for the upper ones.
func TestDoubletShares(t *testing.T) {
	for l := 0; l < MaxLevel; l++ {
		k := l + 1
		for jl := 2*l - 1; jl <= 2*l+1; jl += 2 {
			sum := doubletShare(l, k, jl, 2*k-1) + doubletShare(l, k, jl, 2*k+1)
			want := float64(jl+1) / float64(2*(2*l+1))
			within(t, fmt.Sprintf("share of 2j=%d, l=%d", jl, l), sum, want, 1e-15)
		}
		for jk := 2*k - 1; jk <= 2*k+1; jk += 2 {
			sum := doubletShare(k, l, jk, 2*l-1) + doubletShare(k, l, jk, 2*l+1)
			want := float64(jk+1) / float64(2*(2*k+1))
			within(t, fmt.Sprintf("share of 2j=%d, l=%d", jk, k), sum, want, 1e-15)
		}
	}
}

func TestBadQuantumNumbers(t *testing.T) {
	for _, p := range [][2]int{{0, 2}, {2, 2}, {3, 2}, {1, MaxLevel + 1}, {-1, 4}} {
		if x, err := NewTransition(p[0], p[1]); err == nil {
			t.Errorf("NewTransition(%d, %d) = %+v, want an error", p[0], p[1], x)
		}
	}
	for _, q := range [][4]int{{1, 0, 2, 0}, {1, 1, 2, 0}, {2, 0, 1, 1}, {1, 0, MaxLevel + 1, 1}, {2, -1, 3, 0}, {3, 0, 4, -1}} {
		if f, err := OscillatorStrength(q[0], q[1], q[2], q[3]); err == nil {
			t.Errorf("OscillatorStrength%v = %g, want an error", q, f)
		}
	}
	for _, q := range [][3]int{{0, 0, 1}, {1, 1, 1}, {1, 0, -1}, {2, 1, 5}, {MaxLevel + 1, 0, 1}, {2, -1, 1}} {
		if e, err := Level(q[0], q[1], q[2]); err == nil {
			t.Errorf("Level%v = %g, want an error", q, e)
		}
	}
	for _, q := range [][2]int{{0, 0}, {2, 2}, {MaxLevel + 1, 0}, {3, -1}} {
		if r, err := DecayRate(q[0], q[1]); err == nil {
			t.Errorf("DecayRate%v = %g, want an error", q, r)
		}
	}
}

func BenchmarkNewTransition(b *testing.B) {
	for b.Loop() {
		if _, err := NewTransition(2, 3); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkBuildAtom(b *testing.B) {
	for b.Loop() {
		buildAtom()
	}
}
