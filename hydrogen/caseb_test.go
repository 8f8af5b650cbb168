package hydrogen

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestCaseBAtNodes(t *testing.T) {
	c := readTable(t, "caseB.csv", 42)
	upper := map[string]int{"Ha/Hb": 3, "Hg/Hb": 5, "Hd/Hb": 6, "H10/Hb": 10, "H15/Hb": 15, "H20/Hb": 20}
	nodes := 0
	for i := range c.Len() {
		n, ok := upper[c.Text(i, "ratio")]
		if !ok {
			continue
		}
		nodes++
		got := CaseB(c.Number(i, "T_K"), c.Number(i, "ne_cm-3"), n)
		want := c.Number(i, "value")
		if !(relative(got, want) < 1e-14) { // exp of a logarithm
			t.Errorf("CaseB(%s, %s, %d) = %.16g, want %g", c.Text(i, "T_K"), c.Text(i, "ne_cm-3"), n, got, want)
		}
	}
	if nodes != 31 {
		t.Errorf("%d nodes compared, want 31", nodes)
	}
}

func TestCaseBBetweenNodes(t *testing.T) {
	c := readTable(t, "caseB.csv", 42)
	// Other published values at 10^4 K and low density, not used in the
	// interpolation: H7, H8, H9 (the last two from memory, three digits).
	upper := map[string]int{"He(H7)/Hb": 7, "H8/Hb": 8, "H9/Hb": 9}
	for i := range c.Len() {
		if n, ok := upper[c.Text(i, "ratio")]; ok {
			delete(upper, c.Text(i, "ratio"))
			if d := relative(CaseB(1e4, 1e2, n), c.Number(i, "value")); !(d < 2e-3) {
				t.Errorf("H%d = %g, want %s", n, CaseB(1e4, 1e2, n), c.Text(i, "value"))
			}
		}
		if c.Text(i, "ratio") == "Lya/Hb" {
			if v, err := strconv.ParseFloat(strings.TrimSpace(c.Text(i, "value")), 64); err != nil || v != LymanAlphaOverHbeta {
				t.Errorf("Lyman alpha over H beta = %g, want %s", LymanAlphaOverHbeta, c.Text(i, "value"))
			}
			upper["seen Lya"] = 2
		}
	}
	if len(upper) != 1 || upper["seen Lya"] != 2 {
		t.Errorf("rows of the table not met: %v", upper)
	}
}

func TestCaseBProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		temp := rapid.Float64Range(1e3, 1e5).Draw(t, "T")
		ne := math.Pow(10, rapid.Float64Range(-2, 8).Draw(t, "log ne"))
		last := math.Inf(1)
		for upper := 3; upper <= 20; upper++ {
			r := CaseB(temp, ne, upper)
			if !(r > 0 && r < last) {
				t.Fatalf("H%d = %g after %g", upper, r, last)
			}
			last = r
		}
		if hb := CaseB(temp, ne, 4); hb != 1 {
			t.Fatalf("H beta = %g", hb)
		}
		// All published values of H alpha lie between these two.
		if ha := CaseB(temp, ne, 3); ha < 2.725*(1-1e-12) || ha > 3.041*(1+1e-12) {
			t.Fatalf("H alpha = %g at T=%g, ne=%g", ha, temp, ne)
		}
	})
	for _, q := range []struct {
		temp, ne float64
		upper    int
	}{{1e4, 1e2, 2}, {1e4, 1e2, 21}, {0, 1e2, 3}, {1e4, 0, 3}, {math.NaN(), 1e2, 3}, {1e4, math.NaN(), 3}, {-1, 1e2, 3}} {
		if r := CaseB(q.temp, q.ne, q.upper); !math.IsNaN(r) {
			t.Errorf("CaseB(%g, %g, %d) = %g, want NaN", q.temp, q.ne, q.upper, r)
		}
	}
}

func BenchmarkCaseB(b *testing.B) {
	for b.Loop() {
		sink = CaseB(1.2e4, 3e2, 7)
	}
}
