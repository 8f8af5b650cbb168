package redshift

import (
	"errors"
	"math"

	"duskline/hydrogen"
	"duskline/linelist"
)

// starkRecipe asks for the Balmer lines of a star, broadened by pressure: those of
// hydrogen.BalmerAtmosphere.
type starkRecipe struct {
	Density     float64 `toml:"density"`     // electrons, cm^-3
	Temperature float64 `toml:"temperature"` // effective, K
	// Strength is the opacity of the Balmer continuum at its limit over that of the continuum
	// redward of it.
	Strength float64 `toml:"strength"`
	Upper    int     `toml:"upper"` // last upper level of a line
	// Jump asks for what the levels that have dissolved and the Balmer continuum take on top of
	// the lines, instead of the lines.
	Jump bool `toml:"jump"`
}

const (
	// Wavelengths in Angstrom outside which nothing is drawn: the lines have ended there, and
	// the jump goes on where no search goes.
	linesFirst, linesLast = 3500.0, 7600.0
	jumpFirst, jumpLast   = 2900.0, 5200.0
	balmerFine            = 2 // samples a pixel of a table: cores are hardly wider than one
	// leastStandIn is the height of a stand-in, over the deepest place, below which a line is no
	// feature of its own.
	leastStandIn = 0.02
	standInReach = 0.03 // dex
)

// jumpShown is where the jump is of interest, Angstrom.
var jumpShown = [2]float64{3450, 4000}

// sigma is the Gaussian width in km/s by which the depths are broadened: the component's, else
// that of the instrument.
func (r *starkRecipe) sigma(c *component) float64 {
	if c.width > 0 {
		return c.width
	}
	return designSigma
}

// depths returns the depths in the pixels of a table from first on, broadened by a Gaussian of
// sigma km/s, 1 at the deepest place.
func (r *starkRecipe) depths(sigma float64) (depth []float64, first int, err error) {
	star, err := hydrogen.NewBalmerAtmosphere(r.Density, r.Temperature, r.Strength, r.Upper)
	if err != nil {
		return nil, 0, err
	}
	from, to := linesFirst, linesLast
	if r.Jump {
		from, to = jumpFirst, jumpLast
	}
	first = int(math.Round((math.Log10(from) - tableStart) / tableStep))
	last := int(math.Round((math.Log10(to) - tableStart) / tableStep))
	const step = tableStep / balmerFine
	spread := sigma / (speedOfLight * ln10 * step)
	half := int(math.Ceil(reach * spread))
	kernel, sum := make([]float64, 2*half+1), 0.0
	for k := range kernel {
		u := float64(k-half) / spread
		kernel[k] = math.Exp(-0.5 * u * u)
		sum += kernel[k]
	}
	at := star.Lines
	if r.Jump {
		at = star.Jump
	}
	fine := make([]float64, (last-first)*balmerFine+2*half+1)
	for i := range fine {
		fine[i] = at(math.Pow(10, tableStart+float64(first)*tableStep+float64(i-half)*step))
	}
	depth = make([]float64, last-first+1)
	most := 0.0
	for i := range depth {
		for k, g := range kernel {
			depth[i] += g / sum * fine[i*balmerFine+k]
		}
		most = math.Max(most, depth[i])
	}
	if !positive(most) {
		return nil, 0, errors.New("nothing is left of the lines at this density")
	}
	for i := range depth {
		depth[i] /= most
	}
	return depth, first, nil
}

// add adds the depths to the dense part of a component, and for each line a Gaussian that stands
// for it where lines are taken one by one, in the scan and the evidence.
func (r *starkRecipe) add(c *component, list *linelist.List) error {
	depth, first, err := r.depths(r.sigma(c))
	if err != nil {
		return err
	}
	if c.dense == nil {
		n := int((tableEnd - tableStart) / tableStep)
		c.dense = &table{values: make([]float64, n), from: n}
	}
	for i, v := range depth {
		c.dense.values[first+i] -= v
	}
	c.dense.from, c.dense.to = min(c.dense.from, first), max(c.dense.to, first+len(depth))
	if r.Jump {
		return nil
	}
	for n := 3; n <= r.Upper; n++ {
		t, err := standIn(depth, first, n)
		if err != nil {
			return err
		}
		if t.amp >= leastStandIn {
			t.name = lineNear(list, math.Pow(10, t.logWave))
			c.terms = append(c.terms, t)
		}
	}
	return nil
}

// standIn fits a Gaussian on a level to the depths around the Balmer line of an upper level,
// half-way to its next neighbor on either side and no further than standInReach.
func standIn(depth []float64, first, upper int) (term, error) {
	line, err := hydrogen.NewTransition(2, upper)
	if err != nil {
		return term{}, err
	}
	next, err := hydrogen.NewTransition(2, upper+1)
	if err != nil {
		return term{}, err
	}
	out := term{logWave: math.Log10(line.Wave), shadow: true}
	center := (out.logWave-tableStart)/tableStep - float64(first)
	half := math.Min(standInReach, 0.5*math.Log10(line.Wave/next.Wave)) / tableStep
	lo, hi := max(0, int(math.Ceil(center-half))), min(len(depth), int(math.Floor(center+half))+1)
	n, best := float64(hi-lo), math.Inf(1)
	for sigma := 1.0; sigma <= half/1.5; sigma *= 1.1 {
		var g, gg, d, gd, dd float64
		for i := lo; i < hi; i++ {
			u := (float64(i) - center) / sigma
			v := math.Exp(-0.5 * u * u)
			g, gg, d, gd, dd = g+v, gg+v*v, d+depth[i], gd+v*depth[i], dd+depth[i]*depth[i]
		}
		amp := (gd - g*d/n) / (gg - g*g/n)
		if left := dd - d*d/n - amp*(gd-g*d/n); left < best {
			best = left
			out.amp, out.width = amp, sigma*tableStep*ln10*speedOfLight
		}
	}
	return out, nil
}
