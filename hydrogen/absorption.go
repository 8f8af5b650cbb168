package hydrogen

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// AbsorptionLine is what the optical depth of a line needs.
type AbsorptionLine struct {
	Wave  float64 // vacuum Angstrom
	F     float64 // absorption oscillator strength
	Gamma float64 // damping constant, s^-1
}

// tauFactor is sqrt(pi) r_e c in the units of TauZero: Angstrom, km/s, cm^-2.
const tauFactor = sqrtPi * ElectronRadius * SpeedOfLight * 1e4 * 1e-8 / 1e5

// TauZero returns tau_0 = sqrt(pi) e^2/(m_e c) N f lambda / b, the optical depth
// at the center of the line for a column density in cm^-2 and a Doppler
// parameter b > 0 in km/s, before the factor H(a,0) <= 1 (Spitzer 1978, section
// 3.4).
func (l AbsorptionLine) TauZero(column, b float64) float64 {
	return tauFactor * column * l.F * l.Wave / b
}

// Damping returns the damping parameter a = gamma lambda / (4 pi b) for b in km/s.
func (l AbsorptionLine) Damping(b float64) float64 {
	return l.Gamma * l.Wave * 1e-13 / (4 * math.Pi * b)
}

// OpticalDepth returns the optical depth at the rest wavelength wave in vacuum
// Angstrom, with the Voigt profile in frequency: u = (c/b) (lambda_0/wave - 1).
// The transmitted fraction is exp(-tau). column >= 0 in cm^-2, b > 0 in km/s.
func (l AbsorptionLine) OpticalDepth(column, b, wave float64) float64 {
	u := SpeedOfLight / 1e3 / b * (l.Wave/wave - 1)
	return l.TauZero(column, b) * Voigt(l.Damping(b), u)
}

// EquivalentWidth returns the rest-frame equivalent width in Angstrom, the
// integral of 1 - exp(-tau_0 H(a,u)) over u = (c/b) (lambda/lambda_0 - 1) from
// -infinity to infinity, times lambda_0 b/c: the curve of growth with a profile
// symmetric in wavelength. Relative accuracy 2e-6. Zero for column = 0; NaN if
// column is negative, b is not positive or an argument is NaN.
//
// For damped lines it differs by per cents from the integral over a true line;
// see EquivalentWidthWithin.
func (l AbsorptionLine) EquivalentWidth(column, b float64) float64 {
	return l.Wave * b * 1e3 / SpeedOfLight * 2 * l.halfWidth(column, b, 0, math.Inf(1))
}

// EquivalentWidthWithin returns the equivalent width in Angstrom of the profile
// that OpticalDepth gives, symmetric in frequency, between the wavelengths
// Wave (1 - fraction) and Wave (1 + fraction), 0 < fraction < 1. NaN as in
// EquivalentWidth and for a fraction out of range.
func (l AbsorptionLine) EquivalentWidthWithin(column, b, fraction float64) float64 {
	if !(fraction > 0 && fraction < 1) {
		return math.NaN()
	}
	s := b * 1e3 / SpeedOfLight
	blue := l.halfWidth(column, b, s, (1/(1-fraction)-1)/s)
	red := l.halfWidth(column, b, -s, (1-1/(1+fraction))/s)
	return l.Wave * s * (blue + red)
}

// panelOrder is the order of the Gauss-Legendre rule in each panel of halfWidth.
const panelOrder = 12

type legendre struct{ x, w [panelOrder]float64 }

// panelRule is the rule on [0, 1].
var panelRule = sync.OnceValue(func() *legendre {
	r := new(legendre)
	quad.Legendre{}.FixedLocations(r.x[:], r.w[:], 0, 1)
	return r
})

// halfWidth integrates (1 - exp(-tau_0 H(a,u))) / (1 + s u)^2 over u from 0 to
// limit, s = 0 where limit is infinite. Panels are even in the Doppler core,
// where the edge of a saturated line is a tenth of a Doppler width wide, and
// grow by a constant factor in the wings; beyond the last one the wing of
// the Voigt profile, a tau_0/(sqrt(pi) u^2), is integrated in closed form.
func (l AbsorptionLine) halfWidth(column, b, s, limit float64) float64 {
	tau, a := l.TauZero(column, b), l.Damping(b)
	if !(column >= 0) || !(b > 0) || math.IsInf(b, 1) || math.IsNaN(tau+a) || math.IsInf(tau, 0) {
		return math.NaN()
	}
	const coreEnd, coreStep, growth = 8.0, 0.4, 1.3
	// Where the wing is thin to 1e-8 its closed form is exact to that.
	wingEnd := math.Max(coreEnd, 1e4*math.Sqrt(tau*a/sqrtPi))
	end := math.Min(wingEnd, limit)
	rule := panelRule()
	sum := 0.0
	for lo := 0.0; lo < end; {
		hi := lo + coreStep
		if lo >= coreEnd {
			hi = lo * growth
		}
		hi = math.Min(hi, end)
		panel := 0.0
		for i, x := range rule.x {
			u := lo + (hi-lo)*x
			skew := 1 + s*u
			panel -= rule.w[i] * math.Expm1(-tau*Voigt(a, u)) / (skew * skew)
		}
		sum += panel * (hi - lo)
		lo = hi
	}
	if math.IsInf(limit, 1) {
		sum += tau * a / sqrtPi / end
	} else if limit > end {
		sum += tau * a / sqrtPi * (1/end - 1/limit)
	}
	return sum
}
