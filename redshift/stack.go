package redshift

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"duskline/spectrum"
)

// Composite is a dense rest-frame template: a spectrum divided by its
// continuum, less one. Values of both signs are drawn, times the continuum. It
// is immutable.
type Composite struct {
	// Digest identifies the bytes it was read from.
	Digest string

	shape table // value less one on the rest-frame grid
	high  table // the same without what a continuum takes up
}

// CompositeStep is the step in dex of the rest-frame grid of composites.
const CompositeStep = tableStep

// CompositeRange returns the rest wavelengths in Angstrom between which a
// composite can be used.
func CompositeRange() (first, last float64) {
	return math.Pow(10, tableStart), math.Pow(10, tableEnd)
}

const (
	// leastComposite is the number of pixels that a composite must have.
	leastComposite = 100
	// smoothing is the Gaussian sigma in dex of what is taken from a composite
	// before it is scanned with: half the knot spacing of the continuum.
	smoothing = 0.0125
	// taper is the length in pixels over which the ends of a composite fade.
	taper = 30
)

// NewComposite makes a composite of a rest-frame spectrum that was divided by
// its continuum, on a grid of CompositeStep; digest identifies its bytes.
// Pixels without weight, or outside CompositeRange, say nothing. The values are
// taken at the nearest node, so that a redshift is shifted by half a pixel at
// most when the grid of g lies between the nodes; grids made for composites lie on them.
//
// The error says why g is no composite: of another step, of too few pixels, not
// divided by a continuum (a median far from 1), or without any feature.
func NewComposite(g *spectrum.Grid, digest string) (*Composite, error) {
	if math.Abs(g.Step/CompositeStep-1) > 1e-6 {
		return nil, fmt.Errorf("its step is %g dex, want %g", g.Step, CompositeStep)
	}
	n := int((tableEnd - tableStart) / tableStep)
	c := &Composite{Digest: digest, shape: table{values: make([]float64, n), from: n}, high: table{values: make([]float64, n)}}
	have := make([]bool, n)
	var known []float64
	for i, w := range g.Ivar {
		k := int(math.Round((g.LogWave(i) - tableStart) / tableStep))
		if !(w > 0) || k < 0 || k >= n {
			continue
		}
		if v := g.Flux[i]; math.IsNaN(v) || math.Abs(v) > 1000 {
			return nil, fmt.Errorf("it is %g times its continuum at %.1f Angstrom, want -1000 to 1000", v, math.Pow(10, g.LogWave(i)))
		}
		c.shape.values[k], have[k] = g.Flux[i]-1, true
		c.shape.from, c.shape.to = min(c.shape.from, k), k+1
		known = append(known, g.Flux[i])
	}
	if len(known) < leastComposite {
		return nil, fmt.Errorf("it has %d usable pixels of %g dex between %.0f and %.0f Angstrom, want at least %d",
			len(known), CompositeStep, math.Pow(10, tableStart), math.Pow(10, tableEnd), leastComposite)
	}
	if m := spectrum.Median(known); !(m > 0.5 && m < 2) {
		return nil, fmt.Errorf("its median is %.3g, so that it is not divided by its continuum", m)
	}
	fade(c.shape.values, have)
	highPass(c.high.values, c.shape.values, have, smoothing/tableStep)
	c.high.from, c.high.to = c.shape.from, c.shape.to
	if !slices.ContainsFunc(c.high.values, func(v float64) bool { return math.Abs(v) > 1e-6 }) {
		return nil, errors.New("it has no features: it is a continuum and nothing else")
	}
	return c, nil
}

// Range returns the first and last rest wavelength in Angstrom.
func (c *Composite) Range() (first, last float64) {
	at := func(k int) float64 { return math.Pow(10, tableStart+float64(k)*tableStep) }
	return at(c.shape.from), at(c.shape.to - 1)
}

// fade brings the values to zero over the pixels next to an end or a hole, for
// a step there would count as a feature.
func fade(values []float64, have []bool) {
	last := -1 // pixel without data before i
	for i := range values {
		if !have[i] {
			last = i
			continue
		}
		if d := i - last; d < taper {
			values[i] *= float64(d) / taper
		}
	}
	last = len(values)
	for i := len(values) - 1; i >= 0; i-- {
		if !have[i] {
			last = i
			continue
		}
		if d := last - i; d < taper {
			values[i] *= float64(d) / taper
		}
	}
}

// highPass writes src less its own Gaussian smoothing over the pixels that have
// data; 0 elsewhere.
func highPass(dst, src []float64, have []bool, sigma float64) {
	half := int(math.Ceil(3 * sigma))
	kernel := make([]float64, half+1)
	for j := range kernel {
		u := float64(j) / sigma
		kernel[j] = math.Exp(-0.5 * u * u)
	}
	for i := range src {
		dst[i] = 0
		if !have[i] {
			continue
		}
		var sum, norm float64
		for k := max(0, i-half); k <= min(len(src)-1, i+half); k++ {
			if have[k] {
				g := kernel[max(k-i, i-k)]
				sum += g * src[k]
				norm += g
			}
		}
		dst[i] = src[i] - sum/norm
	}
}

// stretch is the length in dex of the stretches by which the evidence for a
// composite is counted: shorter ones hold single lines, and a chance agreement
// with the data would count.
const stretch = 0.02

// denseFeatures appends a feature for each stretch of the composite of a
// component in which the data demand it by themselves: matched-filter
// signal-to-noise at least SeenSNR and 0.3 of what the model predicts, with the
// rest of the model taken out. Neighbors nearer than 0.6 of a stretch count as
// one: a broad line may lie across the border. The residual of the joint fit
// is in s.tmp.
func (s *Scratch) denseFeatures(c *component, amp, shift float64) {
	l := &s.full
	d := &s.single
	d.reset(l.n)
	c.stack.high.draw(d, l.n, l.start-shift, l.step)
	chunk := max(1, int(math.Round(stretch/l.step)))
	for _, r := range d.runs {
		for lo := r.lo; lo < r.hi; lo += chunk {
			var tr, tt, at float64
			for k := lo; k < min(lo+chunk, r.hi); k++ {
				v := d.values[k] * l.cont[k]
				tr += l.weight[k] * v * (s.tmp[k] + amp*v)
				q := l.weight[k] * v * v
				tt += q
				at += q * float64(k)
			}
			if tt <= 0 {
				continue
			}
			if snr, model := tr/math.Sqrt(tt), amp*math.Sqrt(tt); snr >= SeenSNR && snr > 0.3*model {
				s.features = append(s.features, feature{center: at / tt, sigma: 0.3 * float64(chunk), snr: tr / math.Sqrt(tt)})
			}
		}
	}
}

// Normalize writes g divided by the continuum that the search for a redshift
// multiplies absorption with, and the weights of the search on that scale: the
// template error is in them, and night-sky bands weigh nothing. Where the
// continuum is not above zero by 0.05 of its median the weight is zero. It
// reports false when the spectrum cannot be fitted.
func (f *Finder) Normalize(dst, g *spectrum.Grid, s *Scratch) bool {
	var res Result
	if !f.prepare(g, s, &res) {
		return false
	}
	l := &s.full
	dst.Start, dst.Step = g.Start, g.Step
	dst.Flux, dst.Ivar = grow(dst.Flux, l.n), grow(dst.Ivar, l.n)
	for i, c := range l.cont {
		dst.Flux[i], dst.Ivar[i] = 0, 0
		if s.weight[i] > 0 && s.fit.Value(s.x[i]) >= c {
			dst.Flux[i], dst.Ivar[i] = s.scaled[i]/c, s.weight[i]*c*c
		}
	}
	return true
}
