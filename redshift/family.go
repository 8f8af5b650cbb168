// Package redshift finds the redshift of a spectrum: it scans rest-frame
// template families over their redshift ranges, judges the best few peaks of
// each by one exact joint fit with the continuum, refines the winner below the
// pixel, and says how sure the answer is.
//
// A template family is a handful of components, each a set of lines, bands or
// breaks whose ratios are fixed by physics, with one free, non-negative
// amplitude. Emission adds to the continuum; absorption multiplies it.
package redshift

import (
	"math"
)

const (
	speedOfLight  = 299792.458 // km/s
	maxComponents = 16
	// reach is how many sigma of a Gaussian are drawn.
	reach = 4.0
	ln10  = math.Ln10
)

// Family is a compiled template family. It is immutable.
type Family struct {
	Name    string
	Class   string
	Summary string
	Digest  string
	ZMin    float64
	ZMax    float64
	Widths  []float64

	floor      float64 // km/s, least error of a redshift
	scatters   []ScatterRecipe
	components []component
	expected   []expectedLine
	needs      []int   // components of which one must be there, any if empty
	forested   bool    // has the forest of Lyman-alpha
	proximity  float64 // dex by which its edges are moved blueward
}

type expectedLine struct {
	name    string
	logWave float64
}

// component is a set of shapes of fixed ratios.
type component struct {
	name       string
	absorption bool
	width      float64 // km/s; 0: the family's
	scale      float64 // on the family's width
	least      float64 // amplitude from which it is there, see Family.needs
	most       float64 // largest amplitude, see ComponentRecipe.Most; 0 for no bound
	terms      []term
	edges      []edge
	heads      []head
	forest     bool
	dense      *table // edges, heads and Balmer lines of dense gas, drawn once
	stark      *starkRecipe
	stack      *Composite // dense rest-frame spectrum, nil for none
	source     string     // of its ratios
}

// term is a Gaussian.
type term struct {
	name    string  // of the line, empty for a bump
	logWave float64 // with the shift
	moved   float64 // the shift, km/s
	width   float64 // km/s; 0: the component's
	amp     float64
	// shadow marks a Gaussian that stands for a line in the scan and in the
	// evidence; what is drawn is in the dense part.
	shadow bool
}

// sigmaKms returns the Gaussian width of a term for a family width.
func (c *component) sigmaKms(t *term, familyWidth float64) float64 {
	if t.width > 0 {
		return t.width
	}
	if c.width > 0 {
		return c.width
	}
	return familyWidth * c.scale
}

// lyman returns a family of Lyman-alpha and the forest alone.
func (f *Family) lyman() *Family {
	part := *f
	part.components = []component{
		{name: "forest", absorption: true, forest: true, scale: 1, most: 1.3},
		{name: "lya", scale: 1, terms: []term{{name: "Lya", logWave: forestEdgeLog, amp: 1}}},
	}
	return &part
}

// wide reports whether the component reaches over most of a spectrum.
func (c *component) wide() bool {
	return c.forest || c.stack != nil || c.dense != nil
}

// run is a half-open range of pixels.
type run struct{ lo, hi int }

// drawing is a component drawn on the pixels of a level: values, zero outside
// runs.
type drawing struct {
	values []float64
	runs   []run
}

func (d *drawing) reset(n int) {
	if cap(d.values) < n {
		d.values = make([]float64, n)
		d.runs = d.runs[:0]
		return
	}
	if len(d.values) == n {
		for _, r := range d.runs {
			clear(d.values[r.lo:r.hi])
		}
	} else {
		d.values = d.values[:n]
		clear(d.values)
	}
	d.runs = d.runs[:0]
}

// include adds a range and merges it with the runs it touches; runs stay
// sorted.
func (d *drawing) include(lo, hi int) {
	i := 0
	for i < len(d.runs) && d.runs[i].hi < lo {
		i++
	}
	j := i
	for j < len(d.runs) && d.runs[j].lo <= hi {
		lo, hi = min(lo, d.runs[j].lo), max(hi, d.runs[j].hi)
		j++
	}
	if i == j {
		d.runs = append(d.runs, run{})
		copy(d.runs[i+1:], d.runs[i:])
		d.runs[i] = run{lo, hi}
		return
	}
	d.runs[i] = run{lo, hi}
	d.runs = append(d.runs[:i+1], d.runs[j:]...)
}

// draw draws all of the component but its forest at 1+z = 10^shift on n pixels that start at log10
// wavelength start with the given step. Absorption shapes come out negative:
// the caller multiplies them by the continuum.
func (c *component) draw(d *drawing, n int, start, step, shift, familyWidth float64) {
	d.reset(n)
	sign := 1.0
	if c.absorption {
		sign = -1
	}
	for i := range c.terms {
		t := &c.terms[i]
		if t.shadow {
			continue
		}
		sigma := c.sigmaKms(t, familyWidth) / (speedOfLight * ln10 * step)
		gaussian(d, n, (t.logWave+shift-start)/step, sigma, sign*t.amp)
	}
	if c.dense != nil {
		c.dense.draw(d, n, start-shift, step)
	}
	if c.stack != nil {
		c.stack.shape.draw(d, n, start-shift, step)
	}
}

// gaussian adds amp*exp(-(i-center)^2/(2 sigma^2)) by the recurrence for equal
// steps, outward from the pixel next to the center.
func gaussian(d *drawing, n int, center, sigma, amp float64) {
	half := reach * sigma
	lo, hi := int(math.Ceil(center-half)), int(math.Floor(center+half))+1
	lo, hi = max(0, lo), min(n, hi)
	if lo >= hi {
		return
	}
	d.include(lo, hi)
	mid := max(lo, min(hi-1, int(math.Round(center))))
	q := 1 / (sigma * sigma)
	step2 := math.Exp(-q)
	u := float64(mid) - center
	g0 := amp * math.Exp(-0.5*u*u*q)
	g, r := g0, math.Exp(-(u+0.5)*q)
	for i := mid; i < hi; i++ {
		d.values[i] += g
		g *= r
		r *= step2
	}
	g, r = g0, math.Exp((u-0.5)*q)
	for i := mid - 1; i >= lo; i-- {
		g *= r
		r *= step2
		d.values[i] += g
	}
}
