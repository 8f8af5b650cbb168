package hydrogen

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

func TestForestCoefficients(t *testing.T) {
	c := readTable(t, "inoue2014_table2.csv", 39)
	if c.Len() != len(forestLines) {
		t.Fatalf("%d lines, the paper has %d", len(forestLines), c.Len())
	}
	for i := range c.Len() {
		want := forestLine{c.Number(i, "lambda_A"), c.Number(i, "A_LAF1"), c.Number(i, "A_LAF2"),
			c.Number(i, "A_LAF3"), c.Number(i, "A_DLA1"), c.Number(i, "A_DLA2")}
		l := forestLines[i]
		if l != want {
			t.Errorf("upper level %d: %+v, want %+v", i+2, l, want)
		}
		// The pieces meet, to the four digits printed: catches a wrong column.
		if d := relative(l.dla1*9, l.dla2*27); d > 1e-3 {
			t.Errorf("upper level %d: damped pieces differ by %.1e at r = 3", i+2, d)
		}
		if d := relative(l.laf1*math.Pow(2.2, 1.2), l.laf2*math.Pow(2.2, 3.7)); d > 1e-3 {
			t.Errorf("upper level %d: forest pieces differ by %.1e at r = 2.2", i+2, d)
		}
		if d := relative(l.laf2*math.Pow(5.7, 3.7), l.laf3*math.Pow(5.7, 5.5)); d > 1e-3 {
			t.Errorf("upper level %d: forest pieces differ by %.1e at r = 5.7", i+2, d)
		}
		// Its wavelengths, printed to six digits, are those of the atom.
		x, err := NewTransition(1, i+2)
		if err != nil {
			t.Fatal(err)
		}
		within(t, "wavelength", l.wave, x.Wave, 0.006)
	}
}

func TestTransmissionAgainstTable(t *testing.T) {
	c := readTable(t, "igm_transmission.csv", 99)
	madau := 0
	for i := range c.Len() {
		z, wave := c.Number(i, "z"), c.Number(i, "lambda_obs_A")
		// Seven digits printed; wavelengths to 1e-3 A.
		within(t, "Inoue", Transmission(z, wave), c.Number(i, "Inoue14_T(lambda_L=911.8)"), 2e-6)
		// Below the Lyman alpha of redshift zero the table goes on counting
		// absorbers at negative redshift, which are not there.
		if wave > 1215.67 {
			within(t, "Madau", MadauTransmission(z, wave), c.Number(i, "Madau95_T"), 2e-6)
			madau++
		}
	}
	if madau != 97 {
		t.Errorf("%d values of Madau compared, want 97", madau)
	}
}

// The continuum pieces of Inoue et al. (2014) meet where their formulas change,
// as far as three printed digits let them: half a unit of 0.218 and 2.55e-2 is
// 0.05 in tau at r = 5.7, half a unit of 0.325, 0.250 and 2.55e-2 is 0.005 at
// r = 2.2. A wrong coefficient shows as a larger step; the table above has no point in the
// pieces at r < 2.2 for z > 1.2.
func TestContinuumPiecesMeet(t *testing.T) {
	const d = 1e-9
	for _, zs := range []float64{2.3, 3, 4, 5.6, 5.8, 7} {
		for _, r := range []float64{2.2, 3, 5.7} {
			if r > zs {
				continue
			}
			tol := 0.05
			if r == 2.2 {
				tol = 0.005
			}
			within(t, "forest", forestContinuum(zs, r+d), forestContinuum(zs, r-d), tol)
			within(t, "damped", dampedContinuum(zs, r+d), dampedContinuum(zs, r-d), 0.05)
		}
		within(t, "forest at the source", forestContinuum(zs, zs), 0, 0.05)
		within(t, "damped at the source", dampedContinuum(zs, zs), 0, 0.05)
	}
	for r := 1.0; r < 5.7; r += 0.1 {
		if r < 2.2 {
			within(t, "forest, z = 1.2", forestContinuum(2.2+d, r), forestContinuum(2.2-d, r), 0.05)
		}
		if r < 3 {
			within(t, "damped, z = 2", dampedContinuum(3+d, r), dampedContinuum(3-d, r), 0.05)
		}
		within(t, "forest, z = 4.7", forestContinuum(5.7+d, r), forestContinuum(5.7-d, r), 0.05)
	}
}

func TestTransmissionLimits(t *testing.T) {
	for _, f := range []func(z, wave float64) float64{Transmission, MadauTransmission} {
		for _, q := range [][2]float64{{0, 1000}, {-0.1, 1000}, {3, 1216.1 * 4}, {3, 1e5}} {
			if got := f(q[0], q[1]); got != 1 {
				t.Errorf("T%v = %g, want 1", q, got)
			}
		}
		for _, q := range [][2]float64{{math.NaN(), 5000}, {3, math.NaN()}, {3, 0}, {3, -1}} {
			if got := f(q[0], q[1]); !math.IsNaN(got) {
				t.Errorf("T%v = %g, want NaN", q, got)
			}
		}
		if got, want := f(2, 300), f(2, 911.8); relative(got, want) > 0.01 {
			t.Errorf("T(2, 300) = %g, T(2, 911.8) = %g", got, want)
		}
	}
}

func TestTransmissionProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		z := rapid.Float64Range(0, 9).Draw(t, "z")
		more := rapid.Float64Range(0, 2).Draw(t, "more")
		wave := rapid.Float64Range(500, 12000).Draw(t, "wave")
		for name, f := range map[string]func(z, wave float64) float64{"Inoue": Transmission, "Madau": MadauTransmission} {
			near, far := f(z, wave), f(z+more, wave)
			if !(near >= 0 && near <= 1) {
				t.Fatalf("%s: T(%g, %g) = %g", name, z, wave, near)
			}
			// A farther source has all absorbers of the nearer one and more.
			// The published pieces meet to 0.05 in tau at z = 1.2, 2 and 4.7.
			if far > near*1.06+1e-4 {
				t.Fatalf("%s: T rises from %g at z=%g to %g at z=%g, %g A", name, near, z, far, z+more, wave)
			}
		}
	})
}

func TestPhotoionization(t *testing.T) {
	// Exact hydrogenic cross sections computed independently, five digits; the
	// limit 6.30e-18 also from memory.
	for _, q := range [][2]float64{{LymanLimit, 6.30432e-18}, {900, 6.0896e-18}, {850, 5.2254e-18}, {800, 4.4381e-18},
		{700, 3.0865e-18}, {600, 2.0173e-18}, {500, 1.2103e-18}} {
		if d := relative(LymanLimitCrossSection(q[0]), q[1]); !(d < 4e-5) {
			t.Errorf("sigma(%g) = %g, want %g", q[0], LymanLimitCrossSection(q[0]), q[1])
		}
	}
	// tau = 1 at 1.5862e17 cm^-2, same source.
	within(t, "1/sigma_LL", 1/LymanLimitCrossSection(LymanLimit)/1e17, 1.5862, 5e-5)
	if s := LymanLimitCrossSection(912); s != 0 {
		t.Errorf("sigma redward of the limit = %g", s)
	}
	for _, w := range []float64{0, -1, math.NaN()} {
		if s := LymanLimitCrossSection(w); !math.IsNaN(s) {
			t.Errorf("sigma(%g) = %g, want NaN", w, s)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		w := rapid.Float64Range(1, LymanLimit).Draw(t, "wave")
		if s, more := LymanLimitCrossSection(w*0.99), LymanLimitCrossSection(w); !(s > 0 && s < more) {
			t.Fatalf("sigma(%g) = %g, sigma(%g) = %g", w*0.99, s, w, more)
		}
	})
}

func BenchmarkTransmission(b *testing.B) {
	for b.Loop() {
		sink = Transmission(3, 1100*4)
	}
}

func BenchmarkTransmissionContinuum(b *testing.B) {
	for b.Loop() {
		sink = Transmission(3, 880*4)
	}
}
