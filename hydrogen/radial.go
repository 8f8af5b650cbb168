package hydrogen

import (
	"fmt"
	"math"
)

// MaxLevel is the highest principal quantum number that is handled.
const MaxLevel = 60

// radialIntegrals fills up[l] with R(n l -> m l+1) for l = 0..n-1 and down[l]
// with R(n l -> m l-1) for l = 1..n-1, the integrals of P_nl r P_ml' in Bohr
// radii, for n < m.
//
// The ladder of Infeld & Hull (1951) runs from l = n down to 1; all its terms
// have the same sign, so nothing cancels and the error stays near 1e-14, where
// the alternating sums of the closed forms lose every digit beyond n = 20.
func radialIntegrals(n, m int, up, down *[MaxLevel + 1]float64) {
	fn, fm := float64(n), float64(m)
	// Start: R(n n-1 -> m n) in closed form; R(n n -> m n-1) does not exist.
	lgUp, _ := math.Lgamma(fm + fn + 1)
	lgDown, _ := math.Lgamma(fm - fn)
	lgNorm, _ := math.Lgamma(2 * fn)
	logR := -math.Log(4) + (fn+2)*math.Log(4*fn*fm) + 0.5*(lgUp-lgDown-lgNorm) +
		(fm-fn-2)*math.Log(fm-fn) - (fm+fn+2)*math.Log(fm+fn)
	a, b := math.Exp(logR), 0.0
	up[n-1] = a
	ladder := func(n, l float64) float64 { return math.Sqrt(n*n-l*l) / (n * l) }
	for l := n - 1; l >= 1; l-- {
		fl := float64(l)
		cn1, cm1 := ladder(fn, fl+1), ladder(fm, fl+1)
		if l == n-1 {
			cn1 = 0
		}
		nextUp := ((2*fl+1)*cm1*a + cn1*b) / (2 * fl * ladder(fn, fl))
		nextDown := (cm1*a + (2*fl+1)*cn1*b) / (2 * fl * ladder(fm, fl))
		up[l-1], down[l] = nextUp, nextDown
		a, b = nextUp, nextDown
	}
}

// strengthFromRadial returns the absorption oscillator strength of n l -> m l'
// from its radial integral r, with lmax the larger of l and l':
// f = (1/3) (1/n^2 - 1/m^2) lmax/(2l+1) r^2.
func strengthFromRadial(n, m, l, lmax int, r float64) float64 {
	fn, fm := float64(n), float64(m)
	return (fm*fm - fn*fn) / (3 * fn * fn * fm * fm) * float64(lmax) / float64(2*l+1) * r * r
}

// OscillatorStrength returns the absorption oscillator strength of the
// transition (n, l) -> (m, k) for a nucleus of infinite mass, n < m; multiply
// by 1 + m_e/m_p for 1H. Relative accuracy 1e-12. It is an error unless
// 1 <= n < m <= MaxLevel, 0 <= l < n, 0 <= k < m and |l-k| = 1.
// Gordon (1929), Bethe & Salpeter (1957) section 63.
func OscillatorStrength(n, l, m, k int) (float64, error) {
	if n < 1 || m <= n || m > MaxLevel || l < 0 || l >= n || k < 0 || (k != l+1 && k != l-1) {
		return 0, fmt.Errorf("no electric-dipole transition (%d,%d)-(%d,%d): want 1 <= n < m <= %d, l < n and l differing by 1",
			n, l, m, k, MaxLevel)
	}
	var up, down [MaxLevel + 1]float64
	radialIntegrals(n, m, &up, &down)
	if k > l {
		return strengthFromRadial(n, m, l, k, up[l]), nil
	}
	return strengthFromRadial(n, m, l, l, down[l]), nil
}
