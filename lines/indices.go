package lines

import (
	"bytes"
	"errors"
	"fmt"
	"math"

	"duskline/spectrum"

	"github.com/pelletier/go-toml/v2"
)

// Index is a feature measured between fixed bands: its strength against a
// straight line through the mean fluxes of two side bands. Wavelengths are rest
// frame, vacuum, Angstrom.
type Index struct {
	Name      string
	Band      [2]float64 // where the feature is
	Blue, Red [2]float64 // side bands
	// Magnitude gives -2.5 log10 of the mean of F/Fc in the band instead of an
	// equivalent width.
	Magnitude bool
	// Break gives the ratio of the mean fluxes of Red and Blue; Band is empty.
	Break  bool
	Source string // where the bands were published
}

type indexRow struct {
	Name   string    `toml:"name"`
	Medium string    `toml:"medium"`
	Unit   string    `toml:"unit"`
	Band   []float64 `toml:"band"`
	Blue   []float64 `toml:"blue"`
	Red    []float64 `toml:"red"`
	Source string    `toml:"source"`
}

// ParseIndices reads definitions of indices from TOML: tables [[index]] with the
// keys name, medium ("air" or "vacuum"), unit ("angstrom", "magnitude" or
// "ratio"), band, blue and red (two wavelengths each; no band for a ratio), and
// source. Air wavelengths are brought to vacuum by Ciddor (1996). Every problem
// found is reported, joined into one error.
func ParseIndices(text []byte) ([]Index, error) {
	var doc struct {
		Index []indexRow `toml:"index"`
	}
	if err := toml.NewDecoder(bytes.NewReader(text)).DisallowUnknownFields().Decode(&doc); err != nil {
		var strict *toml.StrictMissingError
		if errors.As(err, &strict) {
			return nil, fmt.Errorf("indices: unknown keys:\n%s", strict.String())
		}
		return nil, fmt.Errorf("indices: %w", err)
	}
	var out []Index
	var errs []error
	seen := map[string]bool{}
	for k, r := range doc.Index {
		bad := func(format string, args ...any) {
			errs = append(errs, fmt.Errorf("indices: index %q: %s", r.Name, fmt.Sprintf(format, args...)))
		}
		ix := Index{Name: r.Name, Magnitude: r.Unit == "magnitude", Break: r.Unit == "ratio", Source: r.Source}
		switch {
		case r.Name == "":
			errs = append(errs, fmt.Errorf("indices: index %d has no name", k+1))
		case seen[r.Name]:
			bad("defined twice")
		}
		seen[r.Name] = true
		if r.Medium != "air" && r.Medium != "vacuum" {
			bad("medium = %q, want air or vacuum", r.Medium)
		}
		if r.Unit != "angstrom" && r.Unit != "magnitude" && r.Unit != "ratio" {
			bad("unit = %q, want angstrom, magnitude or ratio", r.Unit)
		}
		if r.Source == "" {
			bad("source is missing: say where the bands were published")
		}
		for _, b := range []struct {
			name string
			in   []float64
			to   *[2]float64
			none bool
		}{{"band", r.Band, &ix.Band, ix.Break}, {"blue", r.Blue, &ix.Blue, false}, {"red", r.Red, &ix.Red, false}} {
			if b.none && len(b.in) == 0 {
				continue
			}
			if b.none || len(b.in) != 2 || !(b.in[0] > 100 && b.in[0] < b.in[1] && b.in[1] < 1e6) {
				bad("%s = %v, want two increasing wavelengths between 100 and 1e6, and no band for a ratio", b.name, b.in)
				continue
			}
			for i, w := range b.in {
				if b.to[i] = w; r.Medium == "air" {
					b.to[i] = spectrum.AirToVacuum(w)
				}
			}
		}
		if ix.Blue[0]+ix.Blue[1] >= ix.Red[0]+ix.Red[1] {
			bad("blue does not lie blueward of red")
		}
		out = append(out, ix)
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	return out, nil
}

// Measure returns the index at redshift z and its standard error. With the mean
// fluxes Sb and Sr of the side bands, at the mean wavelengths lb and lr of their
// good pixels, Fc = Sb + (Sr - Sb) (lambda - lb)/(lr - lb), and
//
//	angstrom:  I = 1/(1+z) * integral of (1 - F/Fc) dlambda, positive in absorption
//	magnitude: I = -2.5 log10 (1/width * integral of F/Fc dlambda)
//	ratio:     I = Sr/Sb
//
// Pixels at the ends count with the part of them inside; masked ones are left
// out and the band counts as wide as the rest. The error propagates the noise of
// every pixel of the three bands to first order, as Cardiel, Gorgas, Cenarro &
// Gonzalez (1998, A&AS 127, 597), and holds where bands overlap: the side bands
// move all of the continuum together. The arm that covers most of the bands is used. NaN where less than
// MinIndexCover of a band is good or the continuum is not positive.
func (ix *Index) Measure(arms []Arm, z float64) (value, err float64) {
	best, cover := -1, 0.0
	for k := range arms {
		arms[k].check()
		least := 1.0
		for _, b := range ix.bands() {
			least = min(least, arms[k].mean(b[0]*(1+z), b[1]*(1+z)).cover)
		}
		if least > cover {
			best, cover = k, least
		}
	}
	if best < 0 || cover < MinIndexCover {
		return math.NaN(), math.NaN()
	}
	a := &arms[best]
	blue, red := a.mean(ix.Blue[0]*(1+z), ix.Blue[1]*(1+z)), a.mean(ix.Red[0]*(1+z), ix.Red[1]*(1+z))
	if ix.Break {
		r := red.flux / blue.flux
		if !(blue.flux > 0) {
			return math.NaN(), math.NaN()
		}
		return r, math.Hypot(math.Sqrt(red.variance), r*math.Sqrt(blue.variance)) / blue.flux
	}
	lo, hi := ix.Band[0]*(1+z), ix.Band[1]*(1+z)
	var sum, byBlue, byRed, width float64
	for i := max(0, a.index(lo)-1); i < len(a.Wave); i++ {
		p, q := pixelEdges(a.Wave, i)
		if p >= hi {
			break
		}
		d := min(q, hi) - max(p, lo)
		if d <= 0 || !a.usable(i) {
			continue
		}
		u := (a.Wave[i] - blue.wave) / (red.wave - blue.wave)
		fc := blue.flux + (red.flux-blue.flux)*u
		if !(fc > 0) {
			return math.NaN(), math.NaN()
		}
		rel := a.Flux[i] / fc
		sum += d * rel
		byBlue += d * rel / fc * (1 - u)
		byRed += d * rel / fc * u
		width += d
	}
	mean := sum / width
	// What one pixel does to the sum: by itself, and through the side bands,
	// which may overlap the band.
	noise := 0.0
	for i := max(0, a.index(min(lo, ix.Blue[0]*(1+z)))-1); i < len(a.Wave); i++ {
		p, q := pixelEdges(a.Wave, i)
		if p >= max(hi, ix.Red[1]*(1+z)) {
			break
		}
		if !a.usable(i) {
			continue
		}
		u := (a.Wave[i] - blue.wave) / (red.wave - blue.wave)
		g := max(0, min(q, hi)-max(p, lo)) / (blue.flux + (red.flux-blue.flux)*u)
		g -= byBlue * max(0, min(q, ix.Blue[1]*(1+z))-max(p, ix.Blue[0]*(1+z))) / blue.width
		g -= byRed * max(0, min(q, ix.Red[1]*(1+z))-max(p, ix.Red[0]*(1+z))) / red.width
		noise += g * g / a.Ivar[i]
	}
	sd := math.Sqrt(noise) / width
	if ix.Magnitude {
		if !(mean > 0) {
			return math.NaN(), math.NaN()
		}
		return -2.5 * math.Log10(mean), 2.5 / math.Ln10 * sd / mean
	}
	full := ix.Band[1] - ix.Band[0]
	return full * (1 - mean), full * sd
}

// MinIndexCover is the smallest good fraction of a band.
const MinIndexCover = 0.8

func (ix *Index) bands() [][2]float64 {
	if ix.Break {
		return [][2]float64{ix.Blue, ix.Red}
	}
	return [][2]float64{ix.Band, ix.Blue, ix.Red}
}

// usable reports whether flux and weight of a pixel can be used.
func (a *Arm) usable(i int) bool {
	w, f := a.Ivar[i], a.Flux[i]
	return w > 0 && !math.IsInf(w, 0) && !math.IsNaN(f) && !math.IsInf(f, 0)
}

// bandMean is a mean over a band.
type bandMean struct{ flux, variance, wave, cover, width float64 }

// mean averages flux and wavelength of the good pixels from lo to hi, pixels at
// the ends by the part of them inside.
func (a *Arm) mean(lo, hi float64) (m bandMean) {
	width := 0.0
	for i := max(0, a.index(lo)-1); i < len(a.Wave); i++ {
		p, q := pixelEdges(a.Wave, i)
		if p >= hi {
			break
		}
		p, q = max(p, lo), min(q, hi)
		d := q - p
		if d <= 0 || !a.usable(i) {
			continue
		}
		m.flux += d * a.Flux[i]
		m.variance += d * d / a.Ivar[i]
		m.wave += d * 0.5 * (p + q)
		width += d
	}
	if width > 0 {
		m.flux /= width
		m.variance /= width * width
		m.wave /= width
		m.cover, m.width = width/(hi-lo), width
	}
	return m
}
