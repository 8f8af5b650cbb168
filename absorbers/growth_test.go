package absorbers

import (
	"math"
	"testing"

	"duskline/hydrogen"
	"duskline/internal/checkvalues"
)

var lya = hydrogen.AbsorptionLine{Wave: 1215.6701, F: 0.4164, Gamma: 6.265e8}

// The inverse of the curve of growth. Source of the equivalent widths:
// ../testdata/cog_ew.csv, computed by 64-point Gauss-Legendre quadrature. Their ten
// digits and the 2e-6 of EquivalentWidth are magnified by 1/slope, on the flat
// part up to twenty times.
func TestColumnOf(t *testing.T) {
	rows := checkvalues.Rows(t, "../testdata/cog_ew.csv")
	if len(rows) < 100 {
		t.Fatalf("%d rows", len(rows))
	}
	num := func(s string) float64 { return checkvalues.Number(t, s) }
	flat := 0
	for _, row := range rows[1:] {
		line := hydrogen.AbsorptionLine{Wave: num(row[1]), F: num(row[2]), Gamma: num(row[3])}
		b, logN, w := num(row[4]), num(row[5]), num(row[8])
		c := ColumnOf(line, w, 0.01*w, b, 0)
		if d := math.Abs(math.Expm1(math.Ln10 * (c.LogN - logN))); !(d < 1e-4) {
			t.Errorf("%s b=%g log N=%g: %.8f, off by %.1e", row[0], b, logN, c.LogN, d)
		}
		if c.Flat {
			flat++
		}
		if !(c.Low < c.LogN && c.LogN < c.High) {
			t.Errorf("%s b=%g: %.3f is not between %.3f and %.3f", row[0], b, c.LogN, c.Low, c.High)
		}
	}
	if flat == 0 {
		t.Error("no row lies on the flat part")
	}
}

// Slopes in their limits, by the closed forms W ~ N, W ~ sqrt(N), and on the flat
// part W ~ b sqrt(ln tau): doubling b there does not double W, and N is lost.
func TestSlopes(t *testing.T) {
	for _, tc := range []struct{ logN, slope, bSlope, tol float64 }{
		{11, 1, 0, 0.01}, {21.5, 0.5, 0, 0.01},
	} {
		w := lya.EquivalentWidth(math.Pow(10, tc.logN), 20)
		c := ColumnOf(lya, w, 0.05*w, 20, 0)
		if math.Abs(c.Slope-tc.slope) > tc.tol || math.Abs(c.BSlope-tc.bSlope) > tc.tol || c.Flat {
			t.Errorf("log N = %g: %+v", tc.logN, c)
		}
		// Error by the slope: dlogN = dW/W / (slope ln 10).
		if want := 0.05 / tc.slope / math.Ln10; math.Abs(c.Err-want) > 0.02*want {
			t.Errorf("log N = %g: error %.4f, want %.4f", tc.logN, c.Err, want)
		}
	}
	w := lya.EquivalentWidth(1e16, 20)
	c := ColumnOf(lya, w, 0.05*w, 20, 2)
	if !c.Flat || !(c.Slope < 0.15) || !(c.BSlope > 0.7) || !(c.Err > 0.3) || !(c.High-c.Low > 1) {
		t.Errorf("flat part: %+v", c)
	}
	for _, bad := range [][2]float64{{0, 20}, {-1, 20}, {1, 0}, {math.NaN(), 20}, {1e5, 20}, {1e-9, 20}} {
		if c := ColumnOf(lya, bad[0], 0.1, bad[1], 0); !math.IsNaN(c.LogN) {
			t.Errorf("W = %g, b = %g: %+v", bad[0], bad[1], c)
		}
	}
}
