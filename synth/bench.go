package synth

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"

	"duskline/spectrum"
)

// benchmarkPixels is the length of the spectra for benchmarks, 3600 to 10,380
// Angstrom in steps of 1e-4 dex.
const benchmarkPixels = 4600

// benchmarkScenes is how many different sources benchmarks draw from.
const benchmarkScenes = 64

// gallery holds sources that spectra for benchmarks are drawn from: painting is
// much slower than adding noise.
type gallery struct {
	arms    []*arm
	sources []source
}

func newGallery(seed uint64, n int) *gallery {
	g := &gallery{arms: []*arm{newArm("", logGrid(3600, 1e-4, benchmarkPixels), spectrum.Vacuum, 3680, 10300, 45)}}
	for i := range min(n, benchmarkScenes) {
		g.sources = append(g.sources, drawSource(rand.New(rand.NewPCG(seed, uint64(i)))))
	}
	return g
}

// expose returns the i-th spectrum: a source of the gallery with noise of its own.
func (g *gallery) expose(seed uint64, i int) (*exposure, Truth) {
	r := rand.New(rand.NewPCG(seed, 1<<32|uint64(i)))
	s := &g.sources[i%len(g.sources)]
	e := &exposure{id: fmt.Sprintf("LR-b%06d", i), arms: g.arms, begin: nightBegin,
		ra: round(360*r.Float64(), 1e6), dec: round(60*r.Float64()-30, 1e6)}
	t := s.truth()
	t.ObjectID, t.Layout = e.id, TableOfPixels
	e.data, t.SNR = observe(r, g.arms, s.scene, 0, s.snr)
	return e, t
}

// BenchmarkNight writes n files of 4,600 pixels, TableOfPixels, into dir, which
// is made if it is not there. The files, lr-000000.fits and so on, replace others
// of these names. They repeat 64 sources with fresh noise: 2,000 files take some
// seconds.
func BenchmarkNight(dir string, n int) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	g := newGallery(1, n)
	for i := range n {
		e, _ := g.expose(1, i)
		content, err := tableBytes(e)
		if err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(dir, fmt.Sprintf("lr-%06d.fits", i)), content, 0o644); err != nil {
			return err
		}
	}
	return nil
}

// Spectra returns n spectra of 4,600 pixels in memory, barycentric and in
// vacuum, with their truth. They repeat 64 sources with fresh noise and
// share one slice of wavelengths; the same seed gives the same numbers.
func Spectra(seed uint64, n int) ([]*spectrum.Spectrum, []Truth) {
	g := newGallery(seed, n)
	out := make([]*spectrum.Spectrum, n)
	truth := make([]Truth, n)
	for i := range n {
		e, t := g.expose(seed, i)
		p := e.data[0]
		out[i] = &spectrum.Spectrum{ObjectID: e.id, RA: e.ra, Dec: e.dec, Medium: spectrum.Vacuum, Frame: spectrum.Barycentric,
			FluxUnit: fluxUnit, Layout: TableOfPixels,
			Segments: []spectrum.Segment{{Wave: g.arms[0].wave, Flux: p.flux, Ivar: p.ivar, Resolution: []float64{resolvingPower}, LogUniform: true}}}
		truth[i] = t
	}
	return out, truth
}
