package synth

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"

	"duskline/catalog"
	"duskline/internal/fitsout"
	"duskline/spectrum"
)

// The spectra of ShortArchive: a survey of low resolution that looked at galaxies
// and stars through one grating.
const (
	ShortPixels = 600
	ShortStep   = 2.5e-4 // dex, 173 km/s
	shortFirst  = 4000.0 // Angstrom; the last is at 5650
	shortPower  = 1000.0
	shortScenes = 128
)

// ShortArchive writes files of n short spectra each, lr-short-0000.fits and so on,
// into dir, which is made if it is not there: galaxies with and without emission,
// and stars of all temperatures. They repeat 128 sources with fresh noise; the
// same arguments give the same bytes. A file that is there is kept, so that a
// large archive can be gone on with. visit is told what each spectrum is, in
// order; it may be nil.
func ShortArchive(dir string, files, n int, visit func(Truth)) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	arms := []*arm{newArm("S", logGrid(shortFirst, ShortStep, ShortPixels), spectrum.Vacuum, 3900, 5800, 30)}
	sources := shortSources()
	for k := range files {
		name := fmt.Sprintf("lr-short-%04d.fits", k)
		path := filepath.Join(dir, name)
		_, statErr := os.Stat(path)
		if statErr == nil && visit == nil {
			continue
		}
		all := make([]*exposure, n)
		for i := range all {
			number := k*n + i
			r := rand.New(rand.NewPCG(3, 1<<32|uint64(number)))
			s := &sources[number%len(sources)]
			e := &exposure{id: fmt.Sprintf("LR-s%08d", number), arms: arms, begin: nightBegin,
				ra: round(360*r.Float64(), 1e6), dec: round(60*r.Float64()-30, 1e6)}
			t := s.truth()
			t.ObjectID, t.Layout, t.File, t.Row = e.id, ManyObjects, name, i
			e.data, t.SNR = observe(r, arms, s.scene, 0, s.snr)
			all[i] = e
			if visit != nil {
				visit(t)
			}
		}
		if statErr == nil {
			continue
		}
		content, err := encode(func(w *fitsout.Writer) error { return writeManyOf(w, all, shortPower) })
		if err != nil {
			return err
		}
		if err := errors.Join(os.WriteFile(path+".part", content, 0o644), os.Rename(path+".part", path)); err != nil {
			return err
		}
	}
	return nil
}

// shortSources draws galaxies up to z = 0.6 and stars, and blurs them.
func shortSources() []source {
	kmsAPixel := sceneStep * math.Ln10 * spectrum.SpeedOfLight
	sigma := spectrum.SpeedOfLight / 2.3548 * math.Sqrt(1/(shortPower*shortPower)-1.0/(resolvingPower*resolvingPower)) / kmsAPixel
	var out []source
	for i := uint64(0); len(out) < shortScenes; i++ {
		s := drawSource(rand.New(rand.NewPCG(3, i)))
		if s.scene == nil || s.class != catalog.Star && s.class != catalog.Galaxy || s.z > 0.6 {
			continue
		}
		s.scene = s.scene.blurred(sigma)
		out = append(out, s)
	}
	return out
}

// blurred convolves a scene with a Gaussian of sigma pixels.
func (s *scene) blurred(sigma float64) *scene {
	half := int(math.Ceil(4 * sigma))
	kernel, sum := make([]float64, 2*half+1), 0.0
	for i := range kernel {
		u := float64(i-half) / sigma
		kernel[i] = math.Exp(-0.5 * u * u)
		sum += kernel[i]
	}
	out := &scene{make([]float64, len(s.flux))}
	for i := range out.flux {
		for k, w := range kernel {
			out.flux[i] += w / sum * s.flux[min(max(i+k-half, 0), len(s.flux)-1)]
		}
	}
	return out
}
