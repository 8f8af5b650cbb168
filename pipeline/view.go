package pipeline

import "math"

// View is what a picture of a spectrum needs, on the grid of the pipeline. The
// slices belong to the bench that gave it.
type View struct {
	LogWave []float64 // log10 of the wavelength in vacuum, barycentric, Angstrom
	Flux    []float64
	Ivar    []float64 // zero for pixels without data
	// Continuum returns the fitted continuum at a log10 wavelength, NaN where it sees
	// none; nil when there is none at all.
	Continuum func(logWave float64) float64
}

// View shows the last object of Process. Where that object got no redshift, and
// thus no continuum with its lines masked, it is given one without masks.
func (b *Bench) View() View {
	n := b.grid.Len()
	b.x = resized(b.x, n)
	for i := range b.x {
		b.x[i] = b.grid.LogWave(i)
	}
	v := View{LogWave: b.x, Flux: b.grid.Flux, Ivar: b.grid.Ivar}
	if b.level.ready || b.level.plain(&b.grid, b.x, b.chain.set.continuumOptions()) {
		v.Continuum = func(x float64) float64 {
			if x < b.level.edge && x < b.level.main.Basis().Low {
				return math.NaN() // in a saturated forest
			}
			return b.level.Value(x)
		}
	}
	return v
}
