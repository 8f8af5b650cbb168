package hydrogen

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

func TestOpticalDepthConstants(t *testing.T) {
	// sqrt(pi) e^2/(m_e c) = 1.49736415e-15 for cm^-2, Angstrom and km/s;
	// computed from CODATA 2018, nine digits, and 1.497e-15 from memory.
	within(t, "tau_0 factor", AbsorptionLine{Wave: 1, F: 1}.TauZero(1, 1)*1e15, 1.49736415, 5e-9)
	lya := AbsorptionLine{Wave: 1215.6701, F: 0.4164, Gamma: 6.265e8}
	// a = gamma lambda/(4 pi b), computed: 3.030e-4, four digits.
	within(t, "damping of Ly a at 20 km/s", lya.Damping(20), 3.030e-4, 5e-8)
}

func TestEquivalentWidths(t *testing.T) {
	c := readTable(t, "../../testdata/cog_ew.csv", 180)
	for i := range c.Len() {
		line := AbsorptionLine{Wave: c.Number(i, "lambda0_A"), F: c.Number(i, "f"), Gamma: c.Number(i, "gamma_s-1")}
		b, logN := c.Number(i, "b_km_s"), c.Number(i, "logN_cm-2")
		column := math.Pow(10, logN)
		// The table prints nine to eleven digits; Voigt is good to 1e-6.
		for _, q := range []struct {
			what, column string
			got, tol     float64
		}{
			{"a", "a_voigt", line.Damping(b), 1e-8},
			{"tau_0", "tau0_line_centre", line.TauZero(column, b), 1e-8},
			{"W", "W_A_dimensionless_u(symmetric)", line.EquivalentWidth(column, b), 1e-6},
			{"W within 10 %", "W_A_within_pm0.1lam0", line.EquivalentWidthWithin(column, b, 0.1), 1e-6},
		} {
			if d := relative(q.got, c.Number(i, q.column)); !(d < q.tol) {
				t.Errorf("%s b=%g logN=%g: %s = %.9g, off by %.1e", c.Text(i, "line"), b, logN, q.what, q.got, d)
			}
		}
	}
}

func TestEquivalentWidthLimits(t *testing.T) {
	lya := AbsorptionLine{Wave: 1215.6701, F: 0.4164, Gamma: 6.265e8}
	// Linear part: W = 8.85282e-21 N f lambda^2 (Angstrom), six digits; the
	// first saturation term is tau_0/(2 sqrt 2) = 1.3e-7 here.
	within(t, "linear", lya.EquivalentWidth(1e7, 20)/(8.85282e-21*1e7*0.4164*1215.6701*1215.6701), 1, 2e-6)
	// Damping part: W = 7.3182 A sqrt(N/1e20), computed (7.3 from memory); the
	// Doppler core adds 1e-6 at this column.
	within(t, "square root", lya.EquivalentWidth(1e23, 20)/(7.3182*math.Sqrt(1e3)), 1, 2e-5)
	if w := lya.EquivalentWidth(0, 20); w != 0 {
		t.Errorf("W of nothing = %g", w)
	}
	undamped := AbsorptionLine{Wave: 1215.6701, F: 0.4164}
	within(t, "no damping, thin", undamped.EquivalentWidth(1e9, 20)/lya.EquivalentWidth(1e9, 20), 1, 1e-4)
	for _, q := range [][3]float64{{-1, 20, 0.1}, {1e14, 0, 0.1}, {1e14, -1, 0.1}, {math.NaN(), 20, 0.1}, {1e14, math.NaN(), 0.1}, {1e14, math.Inf(1), 0.1}, {math.Inf(1), 20, 0.1}} {
		if w := lya.EquivalentWidth(q[0], q[1]); !math.IsNaN(w) {
			t.Errorf("EquivalentWidth(%g, %g) = %g, want NaN", q[0], q[1], w)
		}
		if w := lya.EquivalentWidthWithin(q[0], q[1], q[2]); !math.IsNaN(w) {
			t.Errorf("EquivalentWidthWithin%v = %g, want NaN", q, w)
		}
	}
	for _, fraction := range []float64{0, 1, -0.1, math.NaN()} {
		if w := lya.EquivalentWidthWithin(1e14, 20, fraction); !math.IsNaN(w) {
			t.Errorf("EquivalentWidthWithin(fraction %g) = %g, want NaN", fraction, w)
		}
	}
}

func TestEquivalentWidthProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x, err := NewTransition(1, rapid.IntRange(2, 40).Draw(t, "upper"))
		if err != nil {
			t.Fatal(err)
		}
		line := x.Absorption()
		logN := rapid.Float64Range(10, 22).Draw(t, "log N")
		b := rapid.Float64Range(2, 300).Draw(t, "b")
		column := math.Pow(10, logN)
		w := line.EquivalentWidth(column, b)
		if more := line.EquivalentWidth(column*1.1, b); !(more > w) {
			t.Fatalf("W = %g at N, %g at 1.1 N", w, more)
		}
		// Never more than the linear part: 1 - exp(-tau) <= tau. Margin: accuracy of W.
		if linear := line.Wave * b * 1e3 / SpeedOfLight * math.Sqrt(math.Pi) * line.TauZero(column, b); w > linear*(1+2e-6) {
			t.Fatalf("W = %g above the linear part %g", w, linear)
		}
		// The definitions of W differ by no more than the wings beyond the window.
		if in := line.EquivalentWidthWithin(column, b, 0.5); w < 0.01*line.Wave && relative(in, w) > 0.02 {
			t.Fatalf("W = %g, within half the wavelength %g", w, in)
		}
	})
}

// The profile is what EquivalentWidthWithin integrates: midpoint sum in
// wavelength over +-10 %.
func TestOpticalDepthIntegrates(t *testing.T) {
	lya := AbsorptionLine{Wave: 1215.6701, F: 0.4164, Gamma: 6.265e8}
	const column, b, fraction, steps = 2e20, 20, 0.1, 200000
	sum := 0.0
	step := 2 * fraction * lya.Wave / steps
	for i := range steps {
		wave := lya.Wave*(1-fraction) + (float64(i)+0.5)*step
		sum -= math.Expm1(-lya.OpticalDepth(column, b, wave)) * step
	}
	// Steps of 0.0012 A, a hundredth of the narrowest structure: 1e-6.
	within(t, "integral of the profile", sum/lya.EquivalentWidthWithin(column, b, fraction), 1, 3e-6)
}

func BenchmarkEquivalentWidth(b *testing.B) {
	lya := AbsorptionLine{Wave: 1215.6701, F: 0.4164, Gamma: 6.265e8}
	b.ReportAllocs()
	for b.Loop() {
		sink = lya.EquivalentWidth(1e18, 20)
	}
}
