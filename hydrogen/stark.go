package hydrogen

import (
	"fmt"
	"math"
	"sync"
)

// StarkProfile is the profile of a Balmer line broadened by the electric fields
// of the ions and electrons around the atom, as in the atmospheres of A stars
// and white dwarfs.
type StarkProfile struct {
	pattern []starkComponent
	scale   float64 // shift in Angstrom of s = 1 in the normal field
	doppler float64 // sqrt(2) sigma in Angstrom of the unshifted component
}

// NewStarkProfile returns the profile of the line 2-upper at the electron
// density ne in cm^-3 and the temperature in K. It is an error unless
// 3 <= upper <= 20 and both are positive and finite.
//
// Approximation: quasi-static linear Stark effect in the field distribution of
// Holtsmark (1919) for ions and electrons together, of density 2 ne, with the
// exact Stark pattern of the line (Schroedinger 1926); components that do not
// shift (H alpha, H gamma, ...) keep their thermal width. It is right in the
// wings, where both kinds of particles act as static (Unsoeld 1955; Griem 1964).
// In the core, electron impacts, ion motion and the shielding of the field are
// left out: the dip at the center of H beta is too deep and the line a third too
// wide at half maximum. Lines stop where levels
// merge; see MergingLevel.
func NewStarkProfile(upper int, ne, tempK float64) (*StarkProfile, error) {
	if upper < 3 || upper > maxStark {
		return nil, fmt.Errorf("no broadened Balmer line 2-%d: want an upper level from 3 to %d", upper, maxStark)
	}
	if !(ne > 0) || math.IsInf(ne, 1) || !(tempK > 0) || math.IsInf(tempK, 1) {
		return nil, fmt.Errorf("electron density %g cm^-3, temperature %g K: want both positive and finite", ne, tempK)
	}
	t, err := NewTransition(2, upper)
	if err != nil {
		return nil, err
	}
	// Normal field F_0 = 2.603 e (2 ne)^(2/3); the shift of s = 1 in it is
	// lambda^2/c (3/2) e a_0 F_0/h = (3/4 pi) alpha a_0 lambda^2 2.603 (2 ne)^(2/3).
	wave := t.Wave * 1e-10
	normal := holtsmarkConstant * math.Pow(2*ne*1e6, 2.0/3)
	mass := ElectronMass * (1 + ProtonElectronRatio)
	return &StarkProfile{
		pattern: starkPatterns()[upper],
		scale:   3 / (4 * math.Pi) * FineStructure * BohrRadius * wave * wave * normal * 1e10,
		doppler: t.Wave * math.Sqrt(2*Boltzmann*tempK/mass) / SpeedOfLight,
	}, nil
}

// At returns the profile at the distance dWave in Angstrom from the center, per
// Angstrom; its integral over all distances is one. NaN gives NaN.
func (p *StarkProfile) At(dWave float64) float64 { return p.below(dWave, math.Inf(1), 1) }

// below is At for the atoms in fields of less than most normal ones; of the unshifted
// component, which says nothing about its field, a share is left.
func (p *StarkProfile) below(dWave, most, share float64) float64 {
	d := math.Abs(dWave)
	sum := 0.0
	for _, c := range p.pattern {
		if c.s == 0 {
			x := d / p.doppler
			sum += share * c.share * math.Exp(-x*x) / (sqrtPi * p.doppler)
			continue
		}
		width := p.scale * float64(c.s)
		if d > most*width {
			continue
		}
		sum += c.share * 0.5 * Holtsmark(d/width) / width
	}
	return sum
}

// MergingLevel returns the principal quantum number beyond which the Balmer
// lines run together at the electron density ne in cm^-3, as a real number:
// log ne = 23.26 - 7.5 log n (Inglis & Teller 1939). NaN unless ne > 0.
func MergingLevel(ne float64) float64 {
	if !(ne > 0) {
		return math.NaN()
	}
	return math.Pow(10, (23.26-math.Log10(ne))/7.5)
}

// holtsmarkConstant is 2 pi (4/15)^(2/3): the normal field in units of e N^(2/3).
const holtsmarkConstant = 2.603109017

const (
	holtsmarkEnd   = 20.0 // series beyond
	holtsmarkSteps = 200
)

type holtsmarkNode struct{ value, slope float64 }

// holtsmarkTable samples the distribution and its slope at steps of 0.1.
var holtsmarkTable = sync.OnceValue(func() *[holtsmarkSteps + 1]holtsmarkNode {
	// W = (2 beta/pi) integral of x sin(beta x) exp(-x^(3/2)), with x = v^2: the
	// integrand starts as v^5 and is gone at v = 3.5, so midpoints are good to 1e-10.
	const step, last = 0.01, 350
	table := new([holtsmarkSteps + 1]holtsmarkNode)
	for i := range table {
		beta := holtsmarkEnd / holtsmarkSteps * float64(i)
		var value, slope float64
		for j := range last {
			v := (float64(j) + 0.5) * step
			x := v * v
			weight := 2 / math.Pi * 2 * v * step * x * math.Exp(-x*v)
			s, c := math.Sincos(beta * x)
			value += weight * beta * s
			slope += weight * (s + beta*x*c)
		}
		table[i] = holtsmarkNode{value, slope}
	}
	return table
})

// Holtsmark returns the probability density W(beta) of the strength of the
// electric field, in units of the normal field F_0 = 2.603 e N^(2/3), among
// randomly placed charges (Holtsmark 1919; Chandrasekhar 1943, chapter IV).
// Relative accuracy 1e-4; zero for beta <= 0; NaN gives NaN.
func Holtsmark(beta float64) float64 {
	switch {
	case math.IsNaN(beta):
		return math.NaN()
	case beta <= 0 || math.IsInf(beta, 1):
		return 0
	case beta < 0.2:
		// First terms of the power series; the next is 0.0238 beta^6.
		b2 := beta * beta
		return 4 / (3 * math.Pi) * b2 * (1 - b2*(0.46302636-b2*0.12259504))
	case beta >= holtsmarkEnd:
		// (2/pi) sum (-1)^(k+1) Gamma(3k/2+2) sin(3 pi k/4)/k! beta^(-1-3k/2), k = 1 .. 6.
		y := 1 / (beta * math.Sqrt(beta))
		return y / beta * (1.4960335515 + y*(7.6394372684+y*(21.598984400-y*y*(447.50395803+3208.5636527*y))))
	}
	step := holtsmarkEnd / holtsmarkSteps
	x := beta / step
	i := int(x)
	x -= float64(i)
	table := holtsmarkTable()
	a, b := table[i], table[i+1]
	h := b.value - a.value
	da, db := a.slope*step, b.slope*step
	return a.value + x*(da+x*(3*h-2*da-db+x*(da+db-2*h)))
}
