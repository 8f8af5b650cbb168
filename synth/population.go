package synth

import (
	"math"
	"math/rand/v2"

	"duskline/catalog"
	"duskline/spectrum"
)

// kind is a sort of object that a night holds.
type kind struct {
	name, class string
	share       float64 // of all fibers
	snr, spread float64 // median and scatter (in ln) of the signal-to-noise ratio
	// draw gives a redshift and what paints a source of this kind there, at the
	// redshift that a canvas has; nil for blank sky.
	draw func(r *rand.Rand) (z float64, paint func(c *canvas), dla *absorber)
}

// starKind draws stars between two temperatures, with the velocities of a thick
// disk.
func starKind(name string, share, snr, cool, hot float64) kind {
	return kind{name, catalog.Star, share, snr, 0.7, func(r *rand.Rand) (float64, func(c *canvas), *absorber) {
		z := 80 * r.NormFloat64() / spectrum.SpeedOfLight
		kelvin := cool + (hot-cool)*r.Float64()
		paint := star(r, kelvin)
		velocity := starMotion(kelvin) * r.NormFloat64()
		return z, func(c *canvas) {
			c.z = moved(c.z, velocity)
			paint(c)
		}, nil
	}}
}

// kinds lists the population; the shares add up to one.
var kinds = []kind{
	{"emission-line galaxy", catalog.Galaxy, 0.30, 4, 0.7, func(r *rand.Rand) (float64, func(c *canvas), *absorber) {
		return 0.03 + 1.25*math.Pow(r.Float64(), 1.3), emissionGalaxy(r), nil
	}},
	{"passive galaxy", catalog.Galaxy, 0.20, 5, 0.6, func(r *rand.Rand) (float64, func(c *canvas), *absorber) {
		return 0.05 + 0.85*r.Float64(), passiveGalaxy(r), nil
	}},
	{"Lyman-break galaxy", catalog.Galaxy, 0.07, 4, 0.5, func(r *rand.Rand) (float64, func(c *canvas), *absorber) {
		return 2.9 + 2.0*r.Float64(), distantGalaxy(r), nil
	}},
	{"quasar", catalog.Quasar, 0.16, 7, 0.7, func(r *rand.Rand) (float64, func(c *canvas), *absorber) {
		z := 0.35 + 3.9*r.Float64()
		paint, dla := quasar(r, z)
		return z, paint, dla
	}},
	starKind("A star", 0.03, 14, 7800, 10500),
	starKind("F star", 0.04, 12, 6100, 7300),
	starKind("G star", 0.05, 11, 5300, 6000),
	starKind("K star", 0.04, 9, 4100, 5200),
	starKind("M star", 0.03, 8, 3000, 3850),
	{"blank sky", Sky, 0.08, 0, 0, nil},
}

// faintShare of the galaxies are much fainter than the rest: nobody could say
// what they are from most of their spectra.
const faintShare = 0.08

// source is an object that a fiber points at.
type source struct {
	class, kind string
	z           float64 // NaN for blank sky
	snr         float64
	scene       *scene // nil for blank sky
	dla         *absorber
}

// drawSource takes the next object of the population and paints it.
func drawSource(r *rand.Rand) source {
	x := r.Float64()
	k := len(kinds) - 1
	for i := range kinds {
		if x < kinds[i].share {
			k = i
			break
		}
		x -= kinds[i].share
	}
	s := source{class: kinds[k].class, kind: kinds[k].name, z: math.NaN()}
	if kinds[k].draw == nil {
		return s
	}
	s.snr = math.Exp(math.Log(kinds[k].snr) + kinds[k].spread*r.NormFloat64())
	s.snr = math.Min(math.Max(s.snr, 1), 32)
	if s.class == catalog.Galaxy && r.Float64() < faintShare {
		s.snr = 0.2 + 0.6*r.Float64()
		s.kind = "faint " + s.kind
	}
	var paint func(c *canvas)
	s.z, paint, s.dla = kinds[k].draw(r)
	s.scene = paintScene(s.z, paint)
	return s
}

// truth begins the truth row of a source.
func (s *source) truth() Truth {
	t := Truth{Class: s.class, Kind: s.kind, Redshift: s.z, AbsorberZ: math.NaN(), LogNHI: math.NaN()}
	if s.dla != nil {
		t.AbsorberZ, t.LogNHI = s.dla.z, s.dla.logNHI
	}
	return t
}
