package main

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// picture is a spectrum made ready for drawing. Pixels without data are NaN.
type picture struct {
	title     string
	flags     string
	fluxLabel string
	redshift  float64 // NaN when there is none
	wave      []float64
	flux      []float64
	smooth    []float64
	sigma     []float64
	continuum []float64
	marks     []pipeline.Mark
	low, high float64 // of the flux worth seeing
	logFlux   bool    // the flux axis is logarithmic, as is
	logWave   bool    // that of wavelength
}

const (
	smoothPixels = 2.0 // sigma of the Gaussian that smooths for the eye
	maxMarks     = 40
	peakPixels   = 8 // half width of the surroundings of an emission line that hold its peak
	// maxPeak bounds the flux range to this many times that of nearly all
	// pixels: one line must not flatten all others. maxStray does where no line is known.
	maxPeak  = 4.0
	maxStray = 3.0
	// A pixel without signal and with noiseRatio times the median error says nothing.
	noiseRatio = 3.0
	// logFrom is the factor that flux spans from which its axis is logarithmic: a decade
	// and a half. Nearly all of it must stand above its errors.
	logFrom = 30.0
	// logWaveFrom is the same for wavelength: from the ultraviolet to the red.
	logWaveFrom = 4.0
)

// newPicture lays out the last object of a bench.
func newPicture(s *spectrum.Spectrum, out *pipeline.Outcome, v pipeline.View) *picture {
	n := len(v.LogWave)
	redshift := out.Object.Redshift
	if out.Object.Verdict == catalog.None {
		redshift = math.NaN() // a guess has no rest frame
	}
	p := &picture{title: title(&out.Object), flags: strings.Join(out.Object.Flags.Names(), ", "), redshift: redshift, marks: pipeline.Marks(out),
		wave: make([]float64, n), flux: make([]float64, n), sigma: make([]float64, n), continuum: make([]float64, n)}
	if len(p.marks) > maxMarks {
		strongest := slices.Clone(p.marks)
		slices.SortStableFunc(strongest, func(a, b pipeline.Mark) int {
			if a.SNR > b.SNR {
				return -1
			}
			return 1
		})
		least := strongest[maxMarks-1].SNR
		p.marks = slices.DeleteFunc(p.marks, func(m pipeline.Mark) bool { return !(m.SNR >= least) })
	}
	for i := range n {
		p.wave[i] = math.Pow(10, v.LogWave[i])
		p.flux[i], p.sigma[i], p.continuum[i] = math.NaN(), math.NaN(), math.NaN()
		if w := v.Ivar[i]; w > 0 {
			p.flux[i], p.sigma[i] = v.Flux[i], 1/math.Sqrt(w)
		}
		if v.Continuum != nil {
			p.continuum[i] = v.Continuum(v.LogWave[i])
		}
	}
	p.trim()
	p.smooth = smoothed(p.flux, p.sigma)
	p.setRange()
	p.scale(s.FluxUnit)
	p.noteCutPeaks()
	return p
}

// trim cuts the ends without data.
func (p *picture) trim() {
	a, b := 0, len(p.flux)
	for a < b && math.IsNaN(p.flux[a]) {
		a++
	}
	for b > a && math.IsNaN(p.flux[b-1]) {
		b--
	}
	p.wave, p.flux, p.sigma, p.continuum = p.wave[a:b], p.flux[a:b], p.sigma[a:b], p.continuum[a:b]
}

// smoothed returns the flux convolved with a Gaussian, weighted with the
// inverse variance; pixels without data stay without.
func smoothed(flux, sigma []float64) []float64 {
	const reach = int(4 * smoothPixels)
	var kernel [2*reach + 1]float64
	for k := range kernel {
		x := float64(k-reach) / smoothPixels
		kernel[k] = math.Exp(-x * x / 2)
	}
	out := make([]float64, len(flux))
	for i := range flux {
		var sum, weight float64
		for k, g := range kernel {
			j := i + k - reach
			if j < 0 || j >= len(flux) || math.IsNaN(flux[j]) {
				continue
			}
			w := g / (sigma[j] * sigma[j])
			sum += w * flux[j]
			weight += w
		}
		out[i] = sum / weight
		if math.IsNaN(flux[i]) {
			out[i] = math.NaN()
		}
	}
	return out
}

// setRange chooses the flux range: nearly all of the smoothed spectrum, without spikes
// and without ends that are noise alone, but with the peaks of the emission lines unless
// they are far higher. Where flux that is seen well spans more than logFrom, the axis is
// logarithmic and cuts no peak.
func (p *picture) setRange() {
	if n := len(p.wave); n > 0 {
		p.logWave = p.wave[n-1] > logWaveFrom*p.wave[0]
	}
	known, clear := p.telling()
	if len(known) == 0 {
		p.low, p.high = 0, 1
		return
	}
	at := func(q float64) float64 { return known[int(q*float64(len(known)-1))] }
	highest := at(0.997)
	for _, m := range p.marks {
		if m.Emission {
			highest = math.Max(highest, p.peak(m.Wave))
		}
	}
	if clear >= 0.95 && at(0.03) > 0 && highest > logFrom*at(0.03) {
		p.logFlux = true
		p.low, p.high = at(0.03)/2, 1.2*highest
		if floor := at(0.003); floor > 0 {
			p.low = math.Min(at(0.03)/1.2, math.Max(p.low, floor))
		}
		return
	}
	bulk := math.Max(at(0.97), -at(0.03))
	p.low = math.Max(math.Min(0, at(0.003)), -1.6*bulk)
	p.high = math.Min(at(0.997), p.low+maxStray*(at(0.97)-p.low))
	p.high = math.Max(p.high, math.Min(highest, p.low+maxPeak*(at(0.97)-p.low)))
	if !(p.high > p.low) {
		p.high = p.low + 1
	}
	p.high += 0.04 * (p.high - p.low)
}

// telling returns the smoothed flux, sorted, without pixels that are noise alone, and
// the share of it above three times its error.
func (p *picture) telling() (known []float64, clear float64) {
	var errors []float64
	for _, s := range p.sigma {
		if !math.IsNaN(s) {
			errors = append(errors, s)
		}
	}
	if len(errors) == 0 {
		return nil, 0
	}
	typical := spectrum.Median(errors)
	for i, f := range p.smooth {
		if math.IsNaN(f) || p.sigma[i] > noiseRatio*typical && math.Abs(f) < noiseRatio*p.sigma[i] {
			continue
		}
		known = append(known, f)
		if f > 3*p.sigma[i] {
			clear++
		}
	}
	slices.Sort(known)
	return known, clear / float64(max(1, len(known)))
}

// peak returns the largest smoothed flux around a wavelength.
func (p *picture) peak(wave float64) float64 {
	center, _ := slices.BinarySearch(p.wave, wave)
	peak := math.Inf(-1)
	for i := max(0, center-peakPixels); i < min(len(p.smooth), center+peakPixels); i++ {
		if p.smooth[i] > peak {
			peak = p.smooth[i]
		}
	}
	return peak
}

// noteCutPeaks says at the name of a line how high it is if the range cuts it.
func (p *picture) noteCutPeaks() {
	for i := range p.marks {
		m := &p.marks[i]
		if peak := p.peak(m.Wave); m.Emission && peak > p.high {
			m.Label += fmt.Sprintf(", up to %.3g", peak)
		}
	}
}

// scale takes a power of ten out of fluxes whose numbers would not fit an axis.
func (p *picture) scale(unit string) {
	p.fluxLabel = "flux"
	exponent := math.Floor(math.Log10(math.Max(p.high, -p.low)))
	factor := 1.0
	if exponent < -2 || exponent > 3 {
		factor = math.Pow(10, -exponent)
		p.fluxLabel = fmt.Sprintf("flux / 1e%.0f", exponent)
	}
	if unit == "" {
		unit = "unit not stated"
	}
	p.fluxLabel += "   [" + unit + "]"
	for _, values := range [][]float64{p.flux, p.smooth, p.sigma, p.continuum} {
		for i := range values {
			values[i] *= factor
		}
	}
	p.low *= factor
	p.high *= factor
}

// spread moves wanted positions, which must be in order, as little as possible
// (least squares) so that neighbors are at least gap apart, and into the range
// from low to high as far as there is room. It pools neighbors that collide
// (isotonic regression; Ayer et al. 1955, Ann. Math. Stat. 26, 641).
func spread(wanted []float64, gap, low, high float64) []float64 {
	type pool struct {
		sum   float64
		count int
	}
	var pools []pool
	for i, x := range wanted {
		pools = append(pools, pool{x - float64(i)*gap, 1})
		for k := len(pools) - 1; k > 0 && pools[k-1].sum/float64(pools[k-1].count) > pools[k].sum/float64(pools[k].count); k-- {
			pools[k-1].sum += pools[k].sum
			pools[k-1].count += pools[k].count
			pools = pools[:k]
		}
	}
	var out []float64
	last := high - float64(len(wanted)-1)*gap
	for _, p := range pools {
		for range p.count {
			x := math.Max(low, math.Min(last, p.sum/float64(p.count)))
			out = append(out, x+float64(len(out))*gap)
		}
	}
	return out
}
