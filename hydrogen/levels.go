package hydrogen

import (
	"fmt"
	"math"
)

// Bethe logarithms ln k0(n,l) (Drake & Swainson 1990, values from memory); the
// last entry of each row is the limit at n -> infinity.
var (
	betheS = [...]float64{2.984128556, 2.811769893, 2.767663612, 2.749811840, 2.740823728, 2.735664207, 2.732429129, 2.730267261, 2.722654335}
	betheP = [...]float64{-0.030016709, -0.038190229, -0.041954895, -0.044034696, -0.045312198, -0.049054544}
	betheD = [...]float64{-0.005232148, -0.006740939, -0.007600751, -0.00940457}
)

// betheLog returns ln k0(n,l), interpolated in 1/n^2 beyond the tabulated n.
// For l > 2 it is taken as zero: it is below 0.002, worth 0.01 MHz.
func betheLog(n, l int) float64 {
	var row []float64
	switch l {
	case 0:
		row = betheS[:]
	case 1:
		row = betheP[:]
	case 2:
		row = betheD[:]
	default:
		return 0
	}
	if i := n - l - 1; i < len(row)-1 {
		return row[i]
	}
	last := len(row) - 2
	limit := row[len(row)-1]
	ratio := float64(last+l+1) / float64(n)
	return limit + (row[last]-limit)*ratio*ratio
}

// levelEnergy returns the energy of level (n, l, j = twoJ/2) below the
// ionization limit in m^-1 (negative). The terms, as in the CODATA adjustments
// (Mohr, Newell & Taylor 2016, section IV): Dirac energy with reduced mass and
// recoil, one-loop self-energy and vacuum polarization through order
// alpha (Z alpha)^6, two-loop terms through alpha^2 (Z alpha)^5, relativistic
// recoil, proton size.
func levelEnergy(n, l, twoJ int) float64 {
	const (
		alpha = FineStructure
		mass  = ProtonElectronRatio
		mr    = mass / (1 + mass) // reduced mass in electron masses
	)
	fn, jHalf := float64(n), float64(twoJ+1)/2 // jHalf = j + 1/2
	delta := alpha * alpha / (jHalf + math.Sqrt(jHalf*jHalf-alpha*alpha))
	x := alpha / (fn - delta)
	dirac := math.Expm1(-0.5 * math.Log1p(x*x)) // f(n,j) - 1 without cancellation

	kappa := jHalf // kappa = l if j = l - 1/2, -(l+1) if j = l + 1/2
	if twoJ == 2*l+1 {
		kappa = -jHalf
	}
	spin := kappa * float64(2*l+1)
	a4 := alpha * alpha * alpha * alpha / (fn * fn * fn)

	e := dirac*mr - dirac*dirac*mr*mr/(2*(1+mass))
	if l > 0 {
		e += a4 * mr * mr * mr / (2 * mass * mass * spin)
	}

	logA := math.Log(1 / (mr * alpha * alpha))
	var loop, recoil float64
	if l == 0 {
		harmonic := 0.0
		for i := 1; i <= n; i++ {
			harmonic += 1 / float64(i)
		}
		a61 := 4*harmonic + 28.0/3*math.Ln2 - 4*math.Log(fn) - 601.0/180 - 77/(45*fn*fn) - 2.0/15
		const (
			a60 = -31 // between -30.9 (1S) and -31.9; from memory, worth 0.02 MHz per unit
			b40 = 0.538941
			b50 = -21.5561
		)
		loop = 4.0/3*(logA-betheLog(n, 0)) + 10.0/9 - 4.0/15 +
			alpha*(4*math.Pi*(139.0/128-math.Ln2/2)+5*math.Pi/48) +
			alpha*alpha*(-logA*logA+a61*logA+a60) +
			alpha/math.Pi*(b40+alpha*b50)
		an := -2 * (math.Log(2/fn) + harmonic + 1 - 1/(2*fn))
		recoil = math.Log(1/(alpha*alpha))/3 - 8.0/3*betheLog(n, 0) - 1.0/9 - 7.0/3*an -
			2/(mass*mass-1)*(mass*mass*math.Log(1/mr)-math.Log(mass/mr))
		const r = ProtonRadius / BohrRadius
		e += 2.0 / 3 * alpha * alpha / (fn * fn * fn) * mr * mr * mr * r * r
	} else {
		loop = -4.0/3*betheLog(n, l) - 1/(2*spin*mr)
		recoil = -8.0/3*betheLog(n, l) - 7.0/3/float64(l*(l+1)*(2*l+1))
	}
	e += alpha / math.Pi * a4 * mr * mr * mr * loop
	e += a4 * alpha / math.Pi * mr * mr * mr / mass * recoil
	return e * 2 * RydbergInfinity / (alpha * alpha) // m_e c^2 / (h c)
}

// Level returns the energy of the fine-structure level (n, l, j = twoJ/2)
// relative to the ionization limit, in cm^-1: negative, 1S at -109678.7717.
// Absolute accuracy about 1e-5 cm^-1 (0.3 MHz); hyperfine structure is averaged
// over. It is an error unless 1 <= n <= MaxLevel, 0 <= l < n, twoJ = 2l +- 1 > 0.
func Level(n, l, twoJ int) (float64, error) {
	if n < 1 || n > MaxLevel || l < 0 || l >= n || twoJ < 1 || (twoJ != 2*l+1 && twoJ != 2*l-1) {
		return 0, fmt.Errorf("no level n=%d l=%d 2j=%d: want 1 <= n <= %d, l < n, 2j = 2l+1 or 2l-1", n, l, twoJ, MaxLevel)
	}
	return levelEnergy(n, l, twoJ) / 100, nil
}
