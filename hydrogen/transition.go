package hydrogen

import (
	"fmt"
	"math"
	"sync"
)

// Transition is a line between two principal quantum numbers with all its
// fine-structure components taken together.
type Transition struct {
	Lower, Upper int
	// Wave is the wavelength of the line's center of gravity in vacuum
	// Angstrom: components weighted by their gf, as for a thin line of an atom
	// whose lower sublevels are populated by their statistical weights.
	Wave float64
	// WaveStrongest is the wavelength of the strongest component, for example
	// 2p3/2-3d5/2 of H alpha.
	WaveStrongest float64
	// F is the absorption oscillator strength of 1H: FInfinite (1 + m_e/m_p).
	F float64
	// FInfinite is the exact non-relativistic value for infinite nuclear mass.
	FInfinite float64
	// A is the spontaneous transition rate Upper -> Lower in s^-1, averaged
	// over the sublevels of Upper by their statistical weights.
	A float64
	// Gamma is the damping constant in s^-1: the total radiative decay rates
	// of the lower and upper sublevel, averaged over the components by gf. For
	// the Lyman series that is the decay rate of the upper p level. The
	// two-photon decay of 2s (8 s^-1) is left out.
	Gamma float64
}

// Absorption returns what the optical depth of the line needs.
func (t Transition) Absorption() AbsorptionLine {
	return AbsorptionLine{Wave: t.Wave, F: t.F, Gamma: t.Gamma}
}

// atom holds everything that NewTransition hands out.
type atom struct {
	lines [MaxLevel + 1][MaxLevel + 1]Transition
	decay [MaxLevel + 1][MaxLevel + 1]float64 // total decay rate of (n, l)
}

var theAtom = sync.OnceValue(buildAtom)

// NewTransition returns the line lower-upper. The first call computes all
// lines, which takes some milliseconds; later calls only copy. It is an error
// unless 1 <= lower < upper <= MaxLevel.
//
// Strengths are the exact non-relativistic ones (Gordon 1929, Menzel & Pekeris
// 1935), components are weighted by LS coupling, and A uses the wavelength of
// the non-relativistic atom, which is consistent to order alpha^2 (3e-5).
func NewTransition(lower, upper int) (Transition, error) {
	if lower < 1 || upper <= lower || upper > MaxLevel {
		return Transition{}, fmt.Errorf("no hydrogen line %d-%d: want 1 <= lower < upper <= %d", lower, upper, MaxLevel)
	}
	return theAtom().lines[lower][upper], nil
}

// DecayRate returns the total rate of spontaneous electric-dipole decay of the
// level (n, l) in s^-1; zero for 1s and 2s. It is an error unless
// 1 <= n <= MaxLevel and 0 <= l < n.
func DecayRate(n, l int) (float64, error) {
	if n < 1 || n > MaxLevel || l < 0 || l >= n {
		return 0, fmt.Errorf("no level n=%d l=%d: want 1 <= n <= %d and 0 <= l < n", n, l, MaxLevel)
	}
	return theAtom().decay[n][l], nil
}

// rateFactor returns A_ul g_u/(g_l f_lu) = 8 pi^2 r_e c / lambda^2 for the
// non-relativistic line n-m of 1H.
func rateFactor(n, m int) float64 {
	fn, fm := float64(n), float64(m)
	inverse := RydbergHydrogen * (fm*fm - fn*fn) / (fn * fn * fm * fm)
	return 8 * math.Pi * math.Pi * ElectronRadius * SpeedOfLight * inverse * inverse
}

func buildAtom() *atom {
	at := new(atom)
	var up, down [MaxLevel + 1]float64
	// energy[n][l][0] is j = l - 1/2, [1] is j = l + 1/2.
	var energy [MaxLevel + 1][MaxLevel + 1][2]float64
	for m := 1; m <= MaxLevel; m++ {
		for l := 0; l < m; l++ {
			energy[m][l][1] = levelEnergy(m, l, 2*l+1)
			if l > 0 {
				energy[m][l][0] = levelEnergy(m, l, 2*l-1)
			}
		}
		for n := 1; n < m; n++ {
			radialIntegrals(n, m, &up, &down)
			rate := rateFactor(n, m) * massFactor
			for l := 0; l < n; l++ {
				wl := float64(2*l + 1)
				at.decay[m][l+1] += rate * wl / float64(2*l+3) * strengthFromRadial(n, m, l, l+1, up[l])
				if l > 0 {
					at.decay[m][l-1] += rate * wl / float64(2*l-1) * strengthFromRadial(n, m, l, l, down[l])
				}
			}
		}
	}
	for m := 2; m <= MaxLevel; m++ {
		for n := 1; n < m; n++ {
			radialIntegrals(n, m, &up, &down)
			var sum componentSum
			for l := 0; l < n; l++ {
				f := strengthFromRadial(n, m, l, l+1, up[l])
				sum.add(f, l, l+1, at.decay[n][l]+at.decay[m][l+1], &energy[n][l], &energy[m][l+1])
				if l > 0 {
					f := strengthFromRadial(n, m, l, l, down[l])
					sum.add(f, l, l-1, at.decay[n][l]+at.decay[m][l-1], &energy[n][l], &energy[m][l-1])
				}
			}
			f := sum.gf / float64(2*n*n)
			at.lines[n][m] = Transition{
				Lower: n, Upper: m,
				Wave:          1e10 * sum.gf / sum.gfWavenumber,
				WaveStrongest: 1e10 / sum.strongest,
				F:             f * massFactor,
				FInfinite:     f,
				A:             rateFactor(n, m) * f * massFactor * float64(n*n) / float64(m*m),
				Gamma:         sum.gfGamma / sum.gf,
			}
		}
	}
	return at
}

// componentSum gathers the fine-structure components of one line.
type componentSum struct {
	gf, gfWavenumber, gfGamma float64
	strongestGF, strongest    float64 // strongest: wavenumber in m^-1
}

// add takes in the components of the multiplet l -> k of strength f.
func (s *componentSum) add(f float64, l, k int, gamma float64, lower, upper *[2]float64) {
	multiplet := 2 * float64(2*l+1) * f
	s.gf += multiplet
	s.gfGamma += multiplet * gamma
	for jl := 0; jl < 2; jl++ {
		for jk := 0; jk < 2; jk++ {
			gf := multiplet * doubletShare(l, k, 2*l-1+2*jl, 2*k-1+2*jk)
			if gf == 0 {
				continue
			}
			wavenumber := upper[jk] - lower[jl]
			s.gfWavenumber += gf * wavenumber
			if gf > s.strongestGF {
				s.strongestGF, s.strongest = gf, wavenumber
			}
		}
	}
}

// doubletShare returns the share of one component j-j' in the strength of a
// doublet multiplet l-k in LS coupling (Condon & Shortley 1935, section 9.9);
// the four shares add to one. Zero for components that do not exist.
func doubletShare(l, k, twoJ, twoK int) float64 {
	if k < l {
		l, k, twoJ, twoK = k, l, twoK, twoJ
	}
	// Now k = l + 1. With the smaller l: j = l-1/2 reaches only l+1/2.
	fl := float64(l)
	total := (2*fl + 1) * (2*fl + 3)
	switch {
	case twoJ < 1 || twoK < 1:
		return 0
	case twoJ == 2*l+1 && twoK == 2*k+1:
		return (fl + 2) * (2*fl + 1) / total
	case twoJ == 2*l+1 && twoK == 2*k-1:
		return 1 / total
	case twoJ == 2*l-1 && twoK == 2*k-1:
		return fl * (2*fl + 3) / total
	}
	return 0
}
