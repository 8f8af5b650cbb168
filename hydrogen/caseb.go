package hydrogen

import "math"

// LymanAlphaOverHbeta is the Case B ratio of the intensities of Lyman alpha and
// H beta at 10^4 K and low density, all Lyman alpha escaping: 23.55 (from a
// published line table; Ly a/H a = 8.22). Resonant scattering and dust make what
// is observed smaller, often by far.
const LymanAlphaOverHbeta = 23.54656

// balmerCaseB is Table 4.4 of Osterbrock & Ferland (2006), I(n-2)/I(H beta), at
// 5000, 10000 and 20000 K for 10^2 and 10^4 cm^-3. High lines are tabulated at
// 10000 K only; the zeros are filled by caseBNode.
var balmerCaseB = [...]struct {
	upper int
	ratio [2][3]float64
}{
	{3, [2][3]float64{{3.041, 2.863, 2.747}, {3.001, 2.847, 2.739}}},
	{4, [2][3]float64{{1, 1, 1}, {1, 1, 1}}},
	{5, [2][3]float64{{0.458, 0.468, 0.475}, {0.460, 0.469, 0.476}}},
	{6, [2][3]float64{{0.251, 0.259, 0.264}, {0.253, 0.260, 0.264}}},
	{10, [2][3]float64{{0.0515, 0.0530, 0.0540}, {0.0520, 0.0533, 0.0541}}},
	{15, [2][3]float64{{0, 0.01561, 0}, {0, 0.01620, 0}}},
	{20, [2][3]float64{{0, 0.00662, 0}, {0, 0.00755, 0}}},
}

// halphaDense is H alpha at 10^6 cm^-3, from the same table.
var halphaDense = [3]float64{2.918, 2.806, 2.725}

// Limits of the table; CaseB clamps to them.
const (
	caseBTempMin, caseBTempMid, caseBTempMax = 5e3, 1e4, 2e4
	caseBDensMin, caseBDensMax               = 1e2, 1e4
	caseBDensHalpha                          = 1e6
)

// CaseB returns I(upper-2)/I(H beta), a ratio of energies, for recombination of
// hydrogen with all Lyman lines trapped (Case B: Baker & Menzel 1938), at the
// electron temperature in K and the electron density in cm^-3.
//
// The values are Table 4.4 of Osterbrock & Ferland (2006), met exactly at its
// nodes: upper = 3, 4, 5, 6, 10, 15, 20. The logarithm of the ratio is
// interpolated quadratically in the logarithm of the temperature, linearly in
// that of the density, and, for other upper levels, by a cubic in that of the
// quantum number through the four nearest nodes (H7, H8, H9: 1 %). H15 and H20, tabulated at
// 10^4 K only, follow the temperature trend of H10.
//
// Temperatures are clamped to 5000-20000 K, densities to 10^2-10^4 cm^-3 (10^6
// for H alpha): the ratios hardly change beyond. NaN for upper < 3 or > 20, and
// for a temperature or density that is NaN or not positive.
func CaseB(tempK, ne float64, upper int) float64 {
	if upper < 3 || upper > 20 || !(tempK > 0) || !(ne > 0) {
		return math.NaN()
	}
	tempK = math.Min(math.Max(tempK, caseBTempMin), caseBTempMax)
	densMax := caseBDensMax
	if upper == 3 {
		densMax = caseBDensHalpha
	}
	ne = math.Min(math.Max(ne, caseBDensMin), densMax)

	last := len(balmerCaseB) - 1
	i := 0
	for i < last && balmerCaseB[i].upper < upper {
		i++
	}
	if balmerCaseB[i].upper == upper {
		return math.Exp(caseBNode(i, tempK, ne))
	}
	// Lagrange cubic through nodes i-2 .. i+1; every gap has H7 or more.
	first := min(i-2, last-3)
	x := math.Log(float64(upper))
	sum := 0.0
	for j := first; j < first+4; j++ {
		term := caseBNode(j, tempK, ne)
		xj := math.Log(float64(balmerCaseB[j].upper))
		for k := first; k < first+4; k++ {
			if k != j {
				xk := math.Log(float64(balmerCaseB[k].upper))
				term *= (x - xk) / (xj - xk)
			}
		}
		sum += term
	}
	return math.Exp(sum)
}

// caseBNode returns the logarithm of the ratio of a tabulated line.
func caseBNode(i int, tempK, ne float64) float64 {
	const h10 = 4
	at := func(d int) float64 {
		if d == 2 {
			return logQuadratic(&halphaDense, tempK)
		}
		r := &balmerCaseB[i].ratio[d]
		if r[0] == 0 {
			trend := &balmerCaseB[h10].ratio[d]
			return math.Log(r[1]) + logQuadratic(trend, tempK) - math.Log(trend[1])
		}
		return logQuadratic(r, tempK)
	}
	x := math.Log(ne/caseBDensMin) / math.Log(caseBDensMax/caseBDensMin) // 0, 1, 2 at 1e2, 1e4, 1e6
	d := 0
	if x > 1 {
		d = 1
	}
	x -= float64(d)
	if x == 0 {
		return at(d)
	}
	return (1-x)*at(d) + x*at(d+1)
}

// logQuadratic interpolates the logarithm of r, given at 5000, 10000 and 20000
// K, by the parabola in log T.
func logQuadratic(r *[3]float64, tempK float64) float64 {
	x := math.Log(tempK/caseBTempMid) / math.Ln2 // -1, 0, 1
	lo, mid, hi := math.Log(r[0]), math.Log(r[1]), math.Log(r[2])
	return mid + x*((hi-lo)/2+x*((hi+lo)/2-mid))
}
