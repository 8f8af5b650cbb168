package hydrogen

import (
	"math"
	"sync"
)

// balmerRydberg is 1e10/R_H in Angstrom; the Balmer series ends at four times as much.
const balmerRydberg = 1e10 / RydbergHydrogen

// BalmerLimit is the limit of the Balmer series in vacuum Angstrom.
const BalmerLimit = 4 * balmerRydberg

// balmerGas is what atoms in the second level absorb at several densities, in units of the
// Balmer continuum at its limit: pressure-broadened lines, and the pseudo-continuum into which
// the high ones dissolve.
//
// Each line has its oscillator strength and the profile of NewStarkProfile for the atoms in
// which its upper level exists: those in a field below that in which the Stark patterns of n and
// n+1 meet,
//
//	3 n^2 e a_0 F = Ry (1/n^2 - 1/(n+1)^2)  (Inglis & Teller 1939).
//
// Cutting the profile there ends the wings half-way to the next line, as Seaton (1990) and
// Tremblay & Bergeron (2009) do (from memory). The dip that the quasi-static profile has at the
// center of every second line is filled up to the maxima beside it, as the motion of the ions
// and the impacts of electrons, which it leaves out, do for the most part.
type balmerGas struct {
	lines []balmerLine
	field [gasLayers]float64 // Rydberg's e/a_0^2 in normal fields of the ions
}

// gasLayers is the number of densities.
const gasLayers = 7

// balmerLine is a line with its opacity over the logarithm of the distance from its center.
type balmerLine struct {
	wave    float64
	reach   float64 // Angstrom from its center, beyond which no layer has opacity to speak of
	opacity [opacityNodes][gasLayers]float64
}

const (
	opacityFirst = 0.02 // Angstrom, inside the thermal width
	opacityStep  = 0.06 // of ln(distance): a power -5/2 is met to (2.5*0.06)^2/8 = 0.3 %
	opacityNodes = 184  // to 1,170 Angstrom: H alpha, the widest, ends at 1,020
)

// opacityAt is the distance of a node, Angstrom.
func opacityAt(node int) float64 { return opacityFirst * math.Exp(opacityStep*float64(node)) }

// newBalmerGas returns the gas with the lines from the upper levels 3 to last, at densities of
// electrons in cm^-3. It is an error where NewStarkProfile has one.
func newBalmerGas(ne *[gasLayers]float64, tempK float64, last int) (*balmerGas, error) {
	g := &balmerGas{lines: make([]balmerLine, last-2)}
	for k, density := range ne {
		g.field[k] = 1 / (BohrRadius * BohrRadius * holtsmarkConstant * math.Pow(density*1e6, 2.0/3))
		for n := 3; n <= last; n++ {
			p, err := NewStarkProfile(n, density, tempK)
			if err != nil {
				return nil, err
			}
			t, err := NewTransition(2, n)
			if err != nil {
				return nil, err
			}
			line := &g.lines[n-3]
			line.wave = t.Wave
			// f phi_nu over df/dnu at the limit, with phi_nu dnu = phi_lambda dlambda. The
			// normal field of the profile is that of ions and electrons.
			scale := t.F * t.Wave * t.Wave / (strengthAtLimit() * balmerRydberg)
			most := g.field[k] * meetingField(float64(n)) / math.Pow(2, 2.0/3)
			high := 0.0
			for i := opacityNodes - 1; i >= 0; i-- {
				high = math.Max(high, scale*p.below(opacityAt(i), most, g.intact(k, float64(n))))
				line.opacity[i][k] = high
				if high > 1e-9 {
					line.reach = math.Max(line.reach, opacityAt(min(i+1, opacityNodes-1)))
				}
			}
		}
	}
	return g, nil
}

// meetingField is the field in which the patterns of n and n+1 meet, in units of e/a_0^2.
func meetingField(n float64) float64 { return (1/(n*n) - 1/((n+1)*(n+1))) / (6 * n * n) }

// strengthAtLimit is continuumStrength of the Balmer continuum.
var strengthAtLimit = sync.OnceValue(func() float64 { return continuumStrength(2) })

// continuumStrength is the oscillator strength per Rydberg of the continuum of a lower level at
// its limit, into which that of the lines goes over: they are n^3/2 levels a Rydberg dense, and
// f n^3 goes as f_0 (1 + c/n^2) for high n.
func continuumStrength(lower int) float64 {
	at := func(n int) (x, y float64) {
		t, err := NewTransition(lower, n)
		if err != nil {
			panic(err) // n is at most MaxLevel
		}
		return 1 / float64(n*n), t.F * float64(n*n*n) / 2
	}
	x1, y1 := at(MaxLevel / 2)
	x2, y2 := at(MaxLevel)
	return y2 - x2*(y1-y2)/(x1-x2)
}

// linesAt returns the opacity of the lines in the layers at a wavelength in vacuum Angstrom.
func (g *balmerGas) linesAt(wave float64) (sum [gasLayers]float64) {
	for i := range g.lines {
		line := &g.lines[i]
		d := math.Abs(wave - line.wave)
		if d >= line.reach {
			continue
		}
		x := math.Max(0, math.Log(d/opacityFirst)/opacityStep)
		j := min(int(x), len(line.opacity)-2)
		x -= float64(j)
		a, b := &line.opacity[j], &line.opacity[j+1]
		for k := range sum {
			sum[k] += (1-x)*a[k] + x*b[k]
		}
	}
	return sum
}

// continuumAt returns that of the continuum,
//
//	(lambda/lambda_limit)^3 (1 - intact(n)),  1/n^2 = 1/4 - 911.76/lambda,
//
// which is the bound-free absorption blueward of the limit, n being infinite (the cube of
// Kramers 1923), and redward of it the absorption into levels that fields have dissolved
// (Daeppen, Anderson & Mihalas 1987; from memory).
func (g *balmerGas) continuumAt(wave float64) (sum [gasLayers]float64) {
	q := wave / BalmerLimit
	level := 0.25 - balmerRydberg/wave
	for k := range sum {
		sum[k] = q * q * q
		if level > 0 {
			sum[k] *= 1 - g.intact(k, 1/math.Sqrt(level))
		}
	}
	return sum
}

// intact returns the share of atoms in which the level n, a real number, exists: the probability
// of a field of the ions below meetingField, as proposed by Hummer & Mihalas (1988).
func (g *balmerGas) intact(layer int, n float64) float64 {
	return holtsmarkBelow(g.field[layer] * meetingField(n))
}

// holtsmarkSums is the integral of the distribution at the nodes of its table.
var holtsmarkSums = sync.OnceValue(func() *[holtsmarkSteps + 1]float64 {
	sums := new([holtsmarkSteps + 1]float64)
	for i := range holtsmarkSteps {
		x := holtsmarkStep * float64(i)
		sums[i+1] = sums[i] + holtsmarkBetween(x, x+holtsmarkStep)
	}
	return sums
})

const holtsmarkStep = holtsmarkEnd / holtsmarkSteps

// holtsmarkBetween integrates the distribution by Simpson's rule over a step at most.
func holtsmarkBetween(a, b float64) float64 {
	return (b - a) / 6 * (Holtsmark(a) + 4*Holtsmark((a+b)/2) + Holtsmark(b))
}

// holtsmarkBelow returns the probability of a field below beta normal fields; NaN gives NaN.
func holtsmarkBelow(beta float64) float64 {
	switch {
	case math.IsNaN(beta):
		return math.NaN()
	case beta <= 0:
		return 0
	case beta >= holtsmarkEnd:
		y := 1 / (beta * math.Sqrt(beta)) // the series of Holtsmark, term by term
		return 1 - y*(1.4960335515/1.5+y*(7.6394372684/3+y*21.598984400/4.5))
	}
	i := int(beta / holtsmarkStep)
	return holtsmarkSums()[i] + holtsmarkBetween(holtsmarkStep*float64(i), beta)
}
