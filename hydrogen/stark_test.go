package hydrogen

import (
	"fmt"
	"math"
	"testing"
)

func TestStarkPatterns(t *testing.T) {
	// H alpha in Schroedinger's units (1926; Bethe & Salpeter 1957, table 16;
	// from memory): pi components 2: 729, 3: 2304, 4: 1681, 8: 1 and sigma 0:
	// 5490, 1: 1936, 5: 16, 6: 18. Each number is one of the two at +-s, which
	// the checksum 2 * 4715 = 5490 + 2 * 1970 confirms. In the mean over
	// directions pi counts one third, sigma two thirds of their field-free sum.
	pi := map[int]float64{2: 729, 3: 2304, 4: 1681, 8: 1}
	sigma := map[int]float64{0: 5490. / 2, 1: 1936, 5: 16, 6: 18}
	want := map[int]float64{}
	for s, v := range pi {
		want[s] = v / 4715 / 3
	}
	for s, v := range sigma {
		want[s] = v / 4715 * 2 / 3
	}
	pattern := starkPattern(3)
	if len(pattern) != len(want) {
		t.Errorf("H alpha has %d components, want %d: %v", len(pattern), len(want), pattern)
	}
	for _, c := range pattern {
		within(t, fmt.Sprintf("H alpha, s=%d", c.s), c.share, want[c.s], 1e-12)
	}

	for upper := 3; upper <= maxStark; upper++ {
		sum := 0.0
		for _, c := range starkPatterns()[upper] {
			sum += c.share
			// Bethe & Salpeter 1957, section 65: even upper levels of the Balmer
			// series have no unshifted component.
			if c.s == 0 && upper%2 == 0 {
				t.Errorf("2-%d: share %g at the center", upper, c.share)
			}
			if outermost := upper*(upper-1) + 2; c.s > outermost {
				t.Errorf("2-%d: component at %d, beyond %d", upper, c.s, outermost)
			}
		}
		within(t, fmt.Sprintf("sum of shares of 2-%d", upper), sum, 1, 1e-13)
	}
}

// The parabolic states are an orthonormal set in the spherical ones, within
// which the field is diagonal: z = (3/2) n k (Bethe & Salpeter 1957, section 51).
func TestParabolicStates(t *testing.T) {
	for n := 1; n <= 10; n++ {
		// Within a level the radial integral is -(3/2) n sqrt(n^2 - l^2).
		eachParabolic(n, func(k, m int) {
			eachParabolic(n, func(kk, mm int) {
				if mm != m {
					return
				}
				overlap, z := 0.0, 0.0
				for l := abs(m); l < n; l++ {
					c := parabolicWeight(n, k, l, m)
					overlap += c * parabolicWeight(n, kk, l, m)
					if l+1 < n {
						r := -1.5 * float64(n) * math.Sqrt(float64(n*n-(l+1)*(l+1)))
						a := dipoleAngle(l, m, l+1, m) * r
						z += a * (c*parabolicWeight(n, kk, l+1, m) + parabolicWeight(n, k, l+1, m)*parabolicWeight(n, kk, l, m))
					}
				}
				wantOverlap, wantZ := 0.0, 0.0
				if k == kk {
					wantOverlap, wantZ = 1, 1.5*float64(n*k)
				}
				within(t, fmt.Sprintf("n=%d <%d|%d>", n, k, kk), overlap, wantOverlap, 1e-11)
				within(t, fmt.Sprintf("n=%d m=%d |<%d|z|%d>|", n, m, k, kk), math.Abs(z), math.Abs(wantZ), 1e-9)
			})
		})
	}
}

func TestHoltsmark(t *testing.T) {
	// Power series: term k
	// is 4/(3 pi) (-1)^k Gamma((4k+6)/3)/(2k+1)! beta^(2k+2) (Chandrasekhar 1943).
	series := func(beta float64) float64 {
		sum, factorial := 0.0, 1.0
		for k := 0; k < 40; k++ {
			if k > 0 {
				factorial *= float64(2*k) * float64(2*k+1)
			}
			sum += math.Pow(-1, float64(k)) * math.Gamma(float64(4*k+6)/3) / factorial * math.Pow(beta, float64(2*k+2))
		}
		return 4 / (3 * math.Pi) * sum
	}
	for _, beta := range []float64{0.01, 0.1, 0.19, 0.21, 0.33, 0.77, 1.25, 2.03, 3.1} {
		within(t, fmt.Sprintf("W(%g)/series", beta), Holtsmark(beta)/series(beta), 1, 1e-4)
	}
	// Largest value 0.3666 near 1.61: from memory, three digits.
	within(t, "W(1.607)", Holtsmark(1.607), 0.367, 1e-3)
	// The table and the series for large beta meet: the first term left out is
	// 12222 beta^-11.5 = 1e-11, 2e-8 of W.
	within(t, "W at the seam", Holtsmark(holtsmarkEnd-1e-12)/Holtsmark(holtsmarkEnd), 1, 1e-5)
	sum := 0.0
	const step = 0.01
	for i := range 100000 {
		sum += Holtsmark((float64(i)+0.5)*step) * step
	}
	sum += 1.4960335515 / 1.5 * math.Pow(1000, -1.5) // the rest of the wing
	within(t, "integral of W", sum, 1, 1e-5)
	if !math.IsNaN(Holtsmark(math.NaN())) || Holtsmark(-1) != 0 || Holtsmark(math.Inf(1)) != 0 {
		t.Error("Holtsmark of NaN, a negative number or infinity")
	}
}

func TestStarkProfile(t *testing.T) {
	for _, upper := range []int{3, 4, 5, 8, 12, 20} {
		p, err := NewStarkProfile(upper, 1e15, 1e4)
		if err != nil {
			t.Fatal(err)
		}
		// Substitute d = sinh(v)/100: fine steps at the center, all of the wing.
		sum := 0.0
		const step = 2e-3
		for v := step / 2; v < 20; v += step {
			sum += 2 * p.At(math.Sinh(v)/100) * math.Cosh(v) / 100 * step
		}
		within(t, fmt.Sprintf("integral of 2-%d", upper), sum, 1, 1e-4)
		// The wing falls as the power -5/2 and is proportional to ne.
		far := p.scale * float64(upper*upper) * 1e3
		within(t, "slope of the wing", math.Log2(p.At(far)/p.At(2*far)), 2.5, 1e-3)
		denser, err := NewStarkProfile(upper, 2e15, 1e4)
		if err != nil {
			t.Fatal(err)
		}
		within(t, "wing at twice the density", denser.At(far)/p.At(far), 2, 1e-3)
		if p.At(-far) != p.At(far) {
			t.Error("not symmetric")
		}
	}
	// The shift of s = 1, by another road: (3/2) e a_0 F/h with e^2 = r_e m_e c^2
	// and F = 1.25e-9 esu N^(2/3) (Griem 1964, three digits, from memory) of N =
	// 2e15 cm^-3; e = 4.80320e-10 esu.
	p, err := NewStarkProfile(4, 1e15, 1e4)
	if err != nil {
		t.Fatal(err)
	}
	field := 1.25e-9 * math.Pow(2e15, 2.0/3)
	shift := 1.5 * 4.80320e-10 * BohrRadius * 100 * field / (Planck * 1e7) // Hz
	within(t, "shift in the normal field", p.scale/(4862.683*4862.683*1e-8*shift/(SpeedOfLight*100)), 1, 2e-3)
	// Thermal width: b = 12.85 km/s sqrt(T/10^4 K) for hydrogen (common
	// practice, no source), four digits.
	within(t, "thermal width, km/s", p.doppler/4862.683*SpeedOfLight/1e3, 12.85, 0.01)

	// Full width of H beta at half maximum at 1e17 cm^-3: 48 A (Gigosos, Gonzalez
	// & Cardenoso 2003, from memory). With electrons as static as ions the width
	// is too large, without them (2^(2/3) smaller) too small.
	p, err = NewStarkProfile(4, 1e17, 1e4)
	if err != nil {
		t.Fatal(err)
	}
	peak, half := 0.0, 0.0
	for d := 0.0; d < 100; d += 0.05 {
		if v := p.At(d); v > peak {
			peak = v
		} else if v > peak/2 {
			half = d
		}
	}
	both, ions := 2*half, 2*half/math.Pow(2, 2.0/3)
	t.Logf("H beta at 1e17 cm^-3: full width at half maximum %.1f A, ions alone %.1f A", both, ions)
	if !(ions < 48 && 48 < both) {
		t.Errorf("full width of H beta: ions alone %.1f A, with electrons %.1f A, want 48 A between", ions, both)
	}

	for _, q := range []struct {
		upper    int
		ne, temp float64
	}{{2, 1e15, 1e4}, {maxStark + 1, 1e15, 1e4}, {4, 0, 1e4}, {4, 1e15, -1}, {4, math.NaN(), 1e4}, {4, 1e15, math.Inf(1)}} {
		if _, err := NewStarkProfile(q.upper, q.ne, q.temp); err == nil {
			t.Errorf("NewStarkProfile%v: want an error", q)
		}
	}
}

func TestMergingLevel(t *testing.T) {
	// log ne = 23.26 - 7.5 log n (Inglis & Teller 1939): n = 10 at 10^15.76.
	within(t, "merging level", MergingLevel(math.Pow(10, 15.76)), 10, 1e-9)
	if !math.IsNaN(MergingLevel(0)) || !math.IsNaN(MergingLevel(math.NaN())) {
		t.Error("want NaN")
	}
}

func BenchmarkStarkProfile(b *testing.B) {
	p, err := NewStarkProfile(4, 1e15, 1e4)
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		sink = p.At(3)
	}
}
