package hydrogen

import (
	"bufio"
	"bytes"
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os/exec"
	"strings"
	"testing"

	"duskline/internal/outside"

	"pgregory.net/rapid"
)

func TestVoigtAgainstTable(t *testing.T) {
	c := readTable(t, "voigt_wofz.csv", 532)
	var worstRe, worstIm, worstFast float64
	for i := range c.Len() {
		a, u := c.Number(i, "a_im_z"), c.Number(i, "u_re_z")
		h, l := c.Number(i, "H_re_w_30dig"), c.Number(i, "L_im_w_30dig")
		w := Faddeeva(complex(u, a))
		worstRe = math.Max(worstRe, relative(real(w), h))
		worstIm = math.Max(worstIm, relative(imag(w), l))
		worstFast = math.Max(worstFast, relative(Voigt(a, u), h))
		if got := VoigtReference(a, -u); got != real(w) {
			t.Errorf("VoigtReference(%g, %g) = %g, Re w = %g", a, -u, got, real(w))
		}
	}
	t.Logf("largest relative deviation: Re %.1e, Im %.1e, Voigt %.1e", worstRe, worstIm, worstFast)
	// 13 terms of one sign cost a few units in the last place; the imaginary
	// part subtracts the residue and loses up to a factor of ten near u = 0.
	if !(worstRe < 5e-15) || !(worstIm < 5e-14) {
		t.Errorf("Faddeeva: Re %.1e, Im %.1e, want 5e-15 and 5e-14", worstRe, worstIm)
	}
	if !(worstFast < 5e-7) { // promised: 1e-6
		t.Errorf("Voigt: %.1e, want 5e-7", worstFast)
	}
}

// Between the nodes of the table, the seams of the method included.
func TestVoigtAgainstReference(t *testing.T) {
	worst, where := 0.0, ""
	check := func(a, u float64) {
		if d := relative(Voigt(a, u), VoigtReference(a, u)); !(d <= worst) {
			worst, where = d, fmt.Sprintf("a=%g u=%g", a, u)
		}
	}
	for logA := -20.0; logA <= 3; logA += 0.05 {
		for u := 0.0; u < 12; u += 0.0171 {
			check(math.Pow(10, logA), u)
		}
		for logU := 0.0; logU < 12; logU += 0.11 {
			check(math.Pow(10, logA), math.Pow(10, logU))
		}
	}
	t.Logf("largest relative deviation %.1e at %s", worst, where)
	if !(worst < 1e-6) {
		t.Errorf("largest relative deviation %.1e at %s, want below 1e-6", worst, where)
	}
}

func TestVoigtLimits(t *testing.T) {
	for _, u := range []float64{0, 0.3, 2, 6, 20, 26} {
		// H(0,u) = exp(-u^2); one ulp of u^2 costs u^2 units in the last place.
		for _, h := range []float64{Voigt(0, u), VoigtReference(0, u)} {
			if d := relative(h, math.Exp(-u*u)); d > 2e-16*(4+u*u) {
				t.Errorf("H(0,%g) = %g, off by %.1e", u, h, d)
			}
		}
	}
	for _, a := range []float64{1e-9, 1e-3, 1, 1e9} {
		// Far wing a/(sqrt(pi) (u^2 + a^2)); next term 1.5/u^2.
		for _, u := range []float64{1e5, 1e12, 1e100} {
			want := a / math.SqrtPi / (u*u + a*a)
			if u == 1e100 && a < 1e9 {
				want = 0 // below the smallest double or nearly so
			}
			got := Voigt(a, u)
			if want > 1e-200 && relative(got, want) > 1e-6 {
				t.Errorf("H(%g,%g) = %g, want %g", a, u, got, want)
			}
			if math.IsNaN(got) || got < 0 {
				t.Errorf("H(%g,%g) = %g", a, u, got)
			}
		}
	}
	for _, f := range []func(a, u float64) float64{Voigt, VoigtReference} {
		if f(1e-3, math.Inf(1)) != 0 || f(1e-3, math.Inf(-1)) != 0 || f(math.Inf(1), 1) != 0 {
			t.Error("not zero at infinity")
		}
		for _, p := range [][2]float64{{-1e-9, 0}, {math.NaN(), 0}, {0, math.NaN()}} {
			if got := f(p[0], p[1]); !math.IsNaN(got) {
				t.Errorf("H(%g,%g) = %g, want NaN", p[0], p[1], got)
			}
		}
	}
	if w := Faddeeva(complex(math.NaN(), 1)); !cmplx.IsNaN(w) {
		t.Errorf("w(NaN + i) = %g", w)
	}
}

func TestFaddeevaSymmetries(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.Float64Range(-26, 26).Draw(t, "x") // beyond 27, exp(-x^2) underflows
		y := rapid.Float64Range(0, 40).Draw(t, "y")
		z := complex(x, y)
		w := Faddeeva(z)
		if got := Faddeeva(-cmplx.Conj(z)); got != cmplx.Conj(w) {
			t.Fatalf("w(-conj z) = %g, conj w(z) = %g", got, cmplx.Conj(w))
		}
		if !(real(w) > 0) || real(w) > 1+1e-15 {
			t.Fatalf("Re w = %g outside (0, 1]", real(w))
		}
		// w(z) + w(-z) = 2 exp(-z^2), where that does not overflow.
		if y*y-x*x < 600 {
			sum, want := w+Faddeeva(-z), 2*cmplx.Exp(-z*z)
			// exp amplifies the rounding of z^2; the sum cancels against |w|.
			tol := 1e-15*(1+cmplx.Abs(z*z))*cmplx.Abs(want) + 1e-15*cmplx.Abs(w)
			if cmplx.Abs(sum-want) > 4*tol {
				t.Fatalf("w(z) + w(-z) = %g, 2 exp(-z^2) = %g", sum, want)
			}
		}
		// w' = -2 z w + 2 i/sqrt(pi) (Abramowitz & Stegun 7.1.20), by a
		// central difference of step d: error d^2 w'''/6 with |w'''| < 8.
		const d = 1e-3
		slope := (Faddeeva(z+d) - Faddeeva(z-d)) / (2 * d)
		exact := -2*z*w + complex(0, 2/math.SqrtPi)
		if cmplx.Abs(slope-exact) > 4e-6 {
			t.Fatalf("w'(%g) = %g, by difference %g", z, exact, slope)
		}
	})
}

func TestVoigtFallsFromTheCenter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		a := math.Pow(10, rapid.Float64Range(-8, 1).Draw(t, "log a"))
		u := rapid.Float64Range(0, 30).Draw(t, "u")
		step := rapid.Float64Range(0.01, 5).Draw(t, "step")
		if near, far := VoigtReference(a, u), VoigtReference(a, u+step); !(near > far) {
			t.Fatalf("H(%g,%g) = %g, H(%g,%g) = %g", a, u, near, a, u+step, far)
		}
	})
}

func TestVoigtDoesNotAllocate(t *testing.T) {
	sum := 0.0
	n := testing.AllocsPerRun(100, func() {
		sum += Voigt(1e-3, 2) + Voigt(1e-3, 20) + VoigtReference(1e-3, 2) + imag(Faddeeva(3+4i))
	})
	if n != 0 || !(sum > 0) {
		t.Errorf("%g allocations a call", n)
	}
}

// Random points against scipy.special.wofz, whose own error is 1e-14 in the
// real and 1.4e-13 in the imaginary part (against the 30-digit table).
func TestFaddeevaAgainstScipy(t *testing.T) {
	python := outside.Python(t, "scipy.special")
	rng := rand.New(rand.NewPCG(1, 2))
	var in strings.Builder
	points := make([]complex128, 4000)
	for i := range points {
		x, y := 10*rng.Float64(), 8*rng.Float64()
		if i%2 == 0 {
			x, y = math.Pow(10, 6*rng.Float64()-4), math.Pow(10, 8*rng.Float64()-7)
		}
		points[i] = complex(x, y)
		fmt.Fprintf(&in, "%v %v\n", x, y)
	}
	cmd := exec.Command(python, "-c", `
import sys
from scipy.special import wofz
for line in sys.stdin:
    x, y = map(float, line.split())
    w = wofz(complex(x, y))
    print(repr(float(w.real)), repr(float(w.imag)))`)
	cmd.Stdin = strings.NewReader(in.String())
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	lines := bufio.NewScanner(bytes.NewReader(out))
	worstRe, worstIm, n := 0.0, 0.0, 0
	for ; lines.Scan(); n++ {
		var re, im float64
		if _, err := fmt.Sscan(lines.Text(), &re, &im); err != nil {
			t.Fatal(err)
		}
		w := Faddeeva(points[n])
		worstRe = math.Max(worstRe, relative(real(w), re))
		worstIm = math.Max(worstIm, relative(imag(w), im))
	}
	t.Logf("%d points: Re %.1e, Im %.1e", n, worstRe, worstIm)
	if n != len(points) || !(worstRe < 2e-13) || !(worstIm < 4e-13) {
		t.Errorf("%d points: Re %.1e, Im %.1e; want %d, 2e-13, 4e-13", n, worstRe, worstIm, len(points))
	}
}

var sink float64

func BenchmarkVoigtCore(b *testing.B) {
	for b.Loop() {
		sink = Voigt(3e-4, 1.7)
	}
}

func BenchmarkVoigtWing(b *testing.B) {
	for b.Loop() {
		sink = Voigt(3e-4, 50)
	}
}

func BenchmarkVoigtReference(b *testing.B) {
	for b.Loop() {
		sink = VoigtReference(3e-4, 1.7)
	}
}
